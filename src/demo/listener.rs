//! The judge's link to the broker: everything that the daemon publishes, collected.

use super::DemoError;
use super::heard::Heard;
use holdtrue_simulators::instrument::PLANT;
use rumqttc::v5::mqttbytes::QoS;
use rumqttc::v5::mqttbytes::v5::Packet;
use rumqttc::v5::{AsyncClient, Event, EventLoop, MqttOptions};
use std::net::SocketAddr;
use std::sync::{Arc, Mutex, PoisonError};
use std::time::Duration;
use tokio::sync::watch;
use tokio::task::JoinHandle;

/// Largest document that is accepted, bytes.
const PACKET_MAX: u32 = 1024 * 1024;
/// How long the broker may take to answer.
const ANSWER_MAX: Duration = Duration::from_secs(20);

/// A subscriber to everything that the node publishes.
pub(super) struct Listener {
    heard: Arc<Mutex<Heard>>,
    /// Counts messages; its end tells that the link has broken.
    news: watch::Receiver<u64>,
    task: JoinHandle<()>,
}

impl Drop for Listener {
    fn drop(&mut self) {
        self.task.abort();
    }
}

impl Listener {
    /// Connects, and returns once the broker has confirmed the subscription.
    pub(super) async fn start(broker: SocketAddr) -> Result<Self, DemoError> {
        let mut options = MqttOptions::new("demo-judge", broker.ip().to_string(), broker.port());
        options
            .set_keep_alive(Duration::from_secs(30))
            .set_max_packet_size(Some(PACKET_MAX));
        let (client, mut events) = AsyncClient::new(options, 16);
        let prefix = format!("holdtrue/{PLANT}/");
        client
            .try_subscribe(format!("{prefix}#"), QoS::AtLeastOnce)
            .map_err(|error| failed(&error))?;
        tokio::time::timeout(ANSWER_MAX, subscribed(&mut events))
            .await
            .map_err(|_| failed(&"the broker does not answer"))??;
        let heard = Arc::new(Mutex::new(Heard::default()));
        let (told, news) = watch::channel(0);
        let task = tokio::spawn(collect(client, events, prefix, Arc::clone(&heard), told));
        Ok(Self { heard, news, task })
    }

    /// Looks at what has been heard so far.
    pub(super) fn look<T>(&self, at: impl FnOnce(&Heard) -> T) -> T {
        at(&self.heard.lock().unwrap_or_else(PoisonError::into_inner))
    }

    /// All that has been heard so far.
    pub(super) fn heard(&self) -> Heard {
        self.look(Heard::clone)
    }

    /// Waits for the next message; false if the link has broken.
    pub(super) async fn next(&mut self) -> bool {
        self.news.changed().await.is_ok()
    }
}

/// Polls until the subscription is confirmed.
async fn subscribed(events: &mut EventLoop) -> Result<(), DemoError> {
    loop {
        match events.poll().await {
            Ok(Event::Incoming(Packet::SubAck(_))) => return Ok(()),
            Ok(_) => {}
            Err(error) => return Err(failed(&error)),
        }
    }
}

/// Collects messages until the link breaks. The client lives as long: without it the link would
/// end.
async fn collect(
    client: AsyncClient,
    mut events: EventLoop,
    prefix: String,
    heard: Arc<Mutex<Heard>>,
    told: watch::Sender<u64>,
) {
    let _client = client;
    while let Ok(event) = events.poll().await {
        let Event::Incoming(Packet::Publish(publish)) = event else {
            continue;
        };
        let topic = String::from_utf8_lossy(&publish.topic);
        if let Some(rest) = topic.strip_prefix(&prefix) {
            heard
                .lock()
                .unwrap_or_else(PoisonError::into_inner)
                .take(rest, &publish.payload);
            told.send_modify(|count| *count += 1);
        }
    }
}

fn failed(why: &dyn std::fmt::Display) -> DemoError {
    DemoError::Part("judge", why.to_string())
}
