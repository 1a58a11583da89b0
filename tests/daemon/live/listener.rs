//! Reads everything that is published, with `mosquitto_sub`.

use super::wait_for;
use std::io::{BufRead, BufReader};
use std::process::{Child, Command, Stdio};
use std::sync::{Arc, Mutex};

/// One message as it was seen.
#[derive(Clone, Debug, PartialEq, Eq)]
pub(crate) struct Heard {
    pub(crate) topic: String,
    pub(crate) retained: bool,
    pub(crate) payload: String,
}

impl Heard {
    /// The payload as JSON.
    pub(crate) fn json(&self) -> serde_json::Value {
        serde_json::from_str(&self.payload).unwrap_or_else(|error| panic!("{error}: {self:?}"))
    }
}

/// A subscriber with a memory. Ends when dropped.
pub(crate) struct Listener {
    process: Child,
    heard: Arc<Mutex<Vec<Heard>>>,
}

impl Listener {
    /// Listens to a filter on the broker at `port`; has subscribed when this returns.
    pub(crate) fn start(port: u16, filter: &str) -> Self {
        let marker = format!("marker/{}/{}", std::process::id(), port);
        let mut process = Command::new("mosquitto_sub")
            .args(["-h", "127.0.0.1", "-p", &port.to_string(), "-q", "1"])
            .args(["-t", filter, "-t", &marker, "-F", "%t %r %p"])
            .stdout(Stdio::piped())
            .spawn()
            .unwrap();
        let lines = BufReader::new(process.stdout.take().unwrap()).lines();
        let heard = Arc::new(Mutex::new(Vec::new()));
        let memory = Arc::clone(&heard);
        std::thread::spawn(move || {
            for line in lines.map_while(Result::ok) {
                let mut parts = line.splitn(3, ' ');
                let mut next = || parts.next().unwrap_or_default().to_owned();
                let (topic, retained, payload) = (next(), next() == "1", next());
                memory.lock().unwrap().push(Heard {
                    topic,
                    retained,
                    payload,
                });
            }
        });
        let listener = Self { process, heard };
        wait_for("the listener has subscribed", || {
            let sent = Command::new("mosquitto_pub")
                .args([
                    "-h",
                    "127.0.0.1",
                    "-p",
                    &port.to_string(),
                    "-t",
                    &marker,
                    "-m",
                    "x",
                ])
                .status()
                .unwrap();
            assert!(sent.success());
            std::thread::sleep(std::time::Duration::from_millis(50));
            listener
                .all()
                .iter()
                .any(|it| it.topic == marker)
                .then_some(())
        });
        listener
            .heard
            .lock()
            .unwrap()
            .retain(|it| it.topic != marker);
        listener
    }

    /// Everything so far.
    pub(crate) fn all(&self) -> Vec<Heard> {
        self.heard.lock().unwrap().clone()
    }

    /// Everything so far on topics that begin so.
    pub(crate) fn on(&self, beginning: &str) -> Vec<Heard> {
        self.all()
            .into_iter()
            .filter(|it| it.topic.starts_with(beginning))
            .collect()
    }

    /// Waits for a message that fits, also among those heard already.
    pub(crate) fn wait(&self, what: &str, fits: impl Fn(&Heard) -> bool) -> Heard {
        wait_for(what, || self.all().into_iter().find(|it| fits(it)))
    }

    /// Waits for a state document with this state.
    pub(crate) fn wait_state(&self, state: &str) -> Heard {
        self.wait(&format!("state {state}"), |it| {
            it.topic.ends_with("/state") && it.json()["state"] == state
        })
    }

    /// Forgets what was heard.
    pub(crate) fn forget(&self) {
        self.heard.lock().unwrap().clear();
    }
}

impl Drop for Listener {
    fn drop(&mut self) {
        let _ = self.process.kill();
        let _ = self.process.wait();
    }
}
