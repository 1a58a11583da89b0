//! The demo's broker: embedded, on a free port of the loopback address, nothing kept on disk.

use super::DemoError;
use mqtt5::broker::config::{BrokerConfig, StorageBackend, StorageConfig};
use mqtt5::broker::{BrokerEventHandler, BrokerShutdownHandle, ClientSubscribeEvent, MqttBroker};
use std::collections::BTreeSet;
use std::net::{Ipv4Addr, SocketAddr};
use std::pin::Pin;
use std::sync::mpsc;
use std::sync::{Arc, Mutex, PoisonError};
use std::thread::JoinHandle;
use std::time::Duration;

/// Messages kept for a client that is slower than the plant. The whole of a long demo fits, so that
/// nothing is dropped.
const QUEUE_MESSAGES: usize = 2_000_000;
/// The same in bytes.
const QUEUE_BYTES: usize = 512 * 1024 * 1024;

/// Messages under way to one client. More than the daemon asks for: with fewer than half of its
/// receive window it would wait for its commit interval again and again.
const IN_FLIGHT: u16 = 10_000;
/// How long the daemon may take to come up.
const SUBSCRIBED_WITHIN: Duration = Duration::from_secs(30);

/// A running broker; ends when dropped.
pub(super) struct Broker {
    /// Where it listens.
    pub(super) address: SocketAddr,
    subscribed: Arc<Subscribed>,
    handle: BrokerShutdownHandle,
    thread: Option<JoinHandle<()>>,
}

/// The topic filters that somebody has subscribed to.
#[derive(Default)]
struct Subscribed(Mutex<BTreeSet<String>>);

impl BrokerEventHandler for Subscribed {
    fn on_client_subscribe<'a>(
        &'a self,
        event: ClientSubscribeEvent,
    ) -> Pin<Box<dyn Future<Output = ()> + Send + 'a>> {
        let filters = event
            .subscriptions
            .into_iter()
            .map(|it| it.topic_filter.to_string());
        self.0
            .lock()
            .unwrap_or_else(PoisonError::into_inner)
            .extend(filters);
        Box::pin(async {})
    }
}

impl Broker {
    /// Starts one on a thread of its own and waits until it listens.
    pub(super) fn start() -> Result<Self, DemoError> {
        let (told, started) = mpsc::channel();
        let subscribed = Arc::new(Subscribed::default());
        let watcher = Arc::clone(&subscribed);
        let thread = std::thread::Builder::new()
            .name("demo-broker".to_owned())
            .spawn(move || serve(&told, watcher))
            .map_err(|error| failed(&error))?;
        let (address, handle) = started
            .recv()
            .map_err(|_| failed(&"it ended before it had begun"))??;
        Ok(Self {
            address,
            subscribed,
            handle,
            thread: Some(thread),
        })
    }

    /// Waits until all of these filters have a subscriber: what is published before is lost.
    pub(super) async fn wait_for_subscriptions(&self, filters: &[&str]) -> Result<(), DemoError> {
        let all = async {
            while !self.has_subscribers(filters) {
                tokio::time::sleep(Duration::from_millis(5)).await;
            }
        };
        tokio::time::timeout(SUBSCRIBED_WITHIN, all)
            .await
            .map_err(|_| failed(&"the daemon does not subscribe to the plant's topics"))
    }

    fn has_subscribers(&self, filters: &[&str]) -> bool {
        let known = self
            .subscribed
            .0
            .lock()
            .unwrap_or_else(PoisonError::into_inner);
        filters.iter().all(|filter| known.contains(*filter))
    }
}

impl Drop for Broker {
    fn drop(&mut self) {
        self.handle.shutdown();
        if let Some(thread) = self.thread.take() {
            // A broker that panicked has nothing left to end.
            let _ = thread.join();
        }
    }
}

type Started = Result<(SocketAddr, BrokerShutdownHandle), DemoError>;

/// Runs the broker until it is told to end.
fn serve(told: &mpsc::Sender<Started>, watcher: Arc<Subscribed>) {
    let runtime = match tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build()
    {
        Ok(runtime) => runtime,
        Err(error) => {
            let _ = told.send(Err(failed(&error)));
            return;
        }
    };
    runtime.block_on(async {
        let mut broker = match MqttBroker::with_config(settings(watcher)).await {
            Ok(broker) => broker,
            Err(error) => {
                let _ = told.send(Err(failed(&error)));
                return;
            }
        };
        let started = broker
            .local_addr()
            .map(|address| (address, broker.shutdown_handle()))
            .ok_or_else(|| failed(&"it has no address"));
        // The listener is bound already: a client that connects before the loop below waits in its
        // queue.
        if told.send(started).is_ok() {
            let _ = broker.run().await;
        }
    });
}

fn settings(watcher: Arc<Subscribed>) -> BrokerConfig {
    let storage = StorageConfig {
        backend: StorageBackend::Memory,
        enable_persistence: false,
        max_queued_messages_per_client: QUEUE_MESSAGES,
        max_queued_bytes_per_client: QUEUE_BYTES,
        ..StorageConfig::default()
    };
    BrokerConfig::default()
        .with_bind_address((Ipv4Addr::LOCALHOST, 0))
        .with_sys_topics_enabled(false)
        .with_max_outbound_inflight(IN_FLIGHT)
        .with_storage(storage)
        .with_event_handler(watcher)
}

fn failed(why: &dyn std::fmt::Display) -> DemoError {
    DemoError::Part("broker", why.to_string())
}
