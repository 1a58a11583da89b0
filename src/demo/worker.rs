//! The daemon inside the demo: the same code as `holdtrue run`, on a thread of its own.

use super::DemoError;
use super::heard::Heard;
use super::listener::Listener;
use crate::configuration::Configuration;
use crate::daemon;
use std::thread::JoinHandle;
use std::time::Duration;
use tokio::sync::oneshot;

/// How long the daemon may publish nothing at all while something is expected of it. It tells its
/// state more often.
const SILENCE_MAX: Duration = Duration::from_secs(90);

/// A running daemon.
pub(super) struct Daemon {
    stop: oneshot::Sender<()>,
    thread: JoinHandle<Result<(), String>>,
}

impl Daemon {
    /// Starts one.
    pub(super) fn start(settings: Configuration) -> Result<Self, DemoError> {
        let (stop, stopped) = oneshot::channel();
        let thread = std::thread::Builder::new()
            .name("demo-daemon".to_owned())
            .spawn(move || serve(settings, stopped))
            .map_err(|error| failed(&error))?;
        Ok(Self { stop, thread })
    }

    /// Waits until what was heard of the daemon satisfies `enough`.
    pub(super) async fn wait_for(
        &self,
        listener: &mut Listener,
        mut enough: impl FnMut(&Heard) -> bool,
    ) -> Result<(), DemoError> {
        while !listener.look(&mut enough) {
            if self.thread.is_finished() {
                return Err(failed(&"it ended too early; its log says why"));
            }
            match tokio::time::timeout(SILENCE_MAX, listener.next()).await {
                Ok(true) => {}
                Ok(false) => return Err(failed(&"the judge's link to the broker broke")),
                Err(_) => return Err(failed(&"it has fallen silent")),
            }
        }
        Ok(())
    }

    /// Ends it and waits until it has said goodbye.
    pub(super) async fn stop(self) -> Result<(), DemoError> {
        // If it has ended already, joining tells why.
        let _ = self.stop.send(());
        let goodbye = async {
            while !self.thread.is_finished() {
                tokio::time::sleep(Duration::from_millis(10)).await;
            }
        };
        if tokio::time::timeout(SILENCE_MAX, goodbye).await.is_err() {
            return Err(failed(&"it does not end"));
        }
        match self.thread.join() {
            Ok(ended) => ended.map_err(|why| failed(&why)),
            Err(_) => Err(failed(&"it panicked")),
        }
    }
}

/// Runs the daemon until it is told to stop, or its owner is gone.
fn serve(settings: Configuration, stopped: oneshot::Receiver<()>) -> Result<(), String> {
    let runtime = tokio::runtime::Builder::new_current_thread()
        .enable_all()
        .build()
        .map_err(|error| error.to_string())?;
    let shutdown = async {
        let _ = stopped.await;
    };
    runtime
        .block_on(daemon::run(settings, shutdown))
        .map_err(|error| error.to_string())
}

fn failed(why: &dyn std::fmt::Display) -> DemoError {
    DemoError::Part("daemon", why.to_string())
}
