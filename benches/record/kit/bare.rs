//! A subscriber that does nothing but acknowledge: what the broker and the client library allow.

use super::cpu_seconds;
use rumqttc::v5::mqttbytes::QoS;
use rumqttc::v5::mqttbytes::v5::Packet;
use rumqttc::v5::{AsyncClient, Event, MqttOptions};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, AtomicU64, Ordering};
use std::time::Duration;

/// A subscriber in a thread of its own.
pub(crate) struct Bare {
    count: Arc<AtomicU64>,
    /// Seconds of the processor, as the bits of an f64.
    cpu: Arc<AtomicU64>,
}

impl Bare {
    /// Subscribes to everything; has subscribed when this returns. Window and session as holdtrue's
    /// defaults.
    pub(crate) fn start(port: u16) -> Self {
        let (count, cpu) = (Arc::new(AtomicU64::new(0)), Arc::new(AtomicU64::new(0)));
        let ready = Arc::new(AtomicBool::new(false));
        let told = (Arc::clone(&count), Arc::clone(&cpu), Arc::clone(&ready));
        std::thread::spawn(move || {
            tokio::runtime::Builder::new_current_thread()
                .enable_all()
                .build()
                .unwrap()
                .block_on(listen(port, &told.0, &told.1, &told.2));
        });
        while !ready.load(Ordering::Relaxed) {
            std::thread::sleep(Duration::from_millis(5));
        }
        Self { count, cpu }
    }

    /// Messages acknowledged so far.
    pub(crate) fn count(&self) -> u64 {
        self.count.load(Ordering::Relaxed)
    }

    /// Seconds of the processor so far.
    pub(crate) fn cpu(&self) -> f64 {
        f64::from_bits(self.cpu.load(Ordering::Relaxed))
    }
}

async fn listen(port: u16, count: &AtomicU64, cpu: &AtomicU64, ready: &AtomicBool) {
    let mut options = MqttOptions::new("bare", "127.0.0.1", port);
    options
        .set_clean_start(false)
        .set_session_expiry_interval(Some(3600))
        .set_receive_maximum(Some(200))
        .set_max_packet_size(Some(2 << 20))
        .set_manual_acks(true)
        .set_keep_alive(Duration::from_secs(15));
    let (client, mut events) = AsyncClient::new(options, 264);
    client.subscribe("#", QoS::AtLeastOnce).await.unwrap();
    loop {
        match events.poll().await.unwrap() {
            Event::Incoming(Packet::Publish(publish)) => {
                client.try_ack(&publish).unwrap();
                if count.fetch_add(1, Ordering::Relaxed).is_multiple_of(1000) {
                    let used = cpu_seconds("/proc/thread-self/stat");
                    cpu.store(used.to_bits(), Ordering::Relaxed);
                }
            }
            Event::Incoming(Packet::SubAck(_)) => ready.store(true, Ordering::Relaxed),
            _ => {}
        }
    }
}
