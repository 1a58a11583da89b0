//! A publisher that costs as little as it can, so that what is measured is the other side: packets
//! of MQTT 3.1.1 written to a socket, quality of service 1, acknowledgements counted.

use std::io::{Read, Write};
use std::net::{Ipv4Addr, TcpStream};
use std::sync::Arc;
use std::sync::atomic::{AtomicU64, Ordering};

/// Messages that the broker has not acknowledged, at most.
const ON_THE_WAY: u64 = 1000;
/// Written at once.
const AT_ONCE: usize = 32;

/// A connected publisher.
pub(crate) struct Feeder {
    stream: TcpStream,
    sent: u64,
    answered: Arc<AtomicU64>,
    buffer: Vec<u8>,
}

/// A message.
pub(crate) struct Message {
    pub(crate) topic: String,
    pub(crate) payload: String,
}

impl Feeder {
    pub(crate) fn connect(port: u16) -> Self {
        let mut stream = TcpStream::connect((Ipv4Addr::LOCALHOST, port)).unwrap();
        stream.set_nodelay(true).unwrap();
        // CONNECT: protocol level 4, clean session, no keep-alive, client "feed".
        let connect = b"\x10\x10\x00\x04MQTT\x04\x02\x00\x00\x00\x04feed";
        stream.write_all(connect).unwrap();
        let mut answer = [0; 4];
        stream.read_exact(&mut answer).unwrap();
        assert_eq!(answer[3], 0, "the broker refuses the connection");
        let answered = Arc::new(AtomicU64::new(0));
        let count = Arc::clone(&answered);
        let mut reading = stream.try_clone().unwrap();
        std::thread::spawn(move || {
            // A PUBACK has four bytes; nothing else comes.
            let mut bytes = [0; 4096];
            let mut total = 0;
            while let Ok(read) = reading.read(&mut bytes) {
                if read == 0 {
                    break;
                }
                total += read as u64;
                count.store(total / 4, Ordering::Relaxed);
            }
        });
        Self {
            stream,
            sent: 0,
            answered,
            buffer: Vec::new(),
        }
    }

    /// Messages so far.
    pub(crate) fn sent(&self) -> u64 {
        self.sent
    }

    /// Publishes a few messages; `false` if the broker has to catch up first.
    pub(crate) fn publish(&mut self, mut next: impl FnMut() -> Message) -> bool {
        if self.sent - self.answered.load(Ordering::Relaxed) > ON_THE_WAY {
            return false;
        }
        self.buffer.clear();
        for _ in 0..AT_ONCE {
            self.sent += 1;
            let message = next();
            self.append(&message);
        }
        self.stream.write_all(&self.buffer).unwrap();
        true
    }

    fn append(&mut self, message: &Message) {
        let (topic, payload) = (message.topic.as_bytes(), message.payload.as_bytes());
        let packet = u16::try_from(self.sent % 65_535 + 1).unwrap();
        self.buffer.push(0x32);
        let mut length = 2 + topic.len() + 2 + payload.len();
        // Variable byte integer (MQTT 3.1.1, section 2.2.3).
        loop {
            let digit = u8::try_from(length % 128).unwrap();
            length /= 128;
            self.buffer
                .push(if length > 0 { digit | 0x80 } else { digit });
            if length == 0 {
                break;
            }
        }
        let topic_length = u16::try_from(topic.len()).unwrap();
        self.buffer.extend(topic_length.to_be_bytes());
        self.buffer.extend(topic);
        self.buffer.extend(packet.to_be_bytes());
        self.buffer.extend(payload);
    }
}
