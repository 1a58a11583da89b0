//! One TOML file becomes one [`Configuration`], or a list of everything that is wrong with it.
//!
//! Parsed once into types that cannot hold a bad value; nobody checks again. Not here: what the
//! engine does with a setup, and how payloads are read.
//!
//! Modules in reading order:
//! - [`problem`]: what can be wrong, with line and column
//! - `source`: the file's text and what was noted while it was read
//! - `reader`: the TOML tree with positions; notices keys that nobody asked for
//! - `quantity`: durations and window lengths, "30 d" and "1024 pairs"
//! - `name`: names of nodes, channels and references, topics and wildcard filters
//! - `place`: where in which payload a value stands
//! - `service`: the tables `[node]`, `[broker]`, `[record]`, `[page]`
//! - `draft`: what has been read while entries still refer to each other by name
//! - `reference`, `influence`, `fit`, `screening`, `steps`, `channel`: one entry each
//! - `crosscheck`: what only shows when all entries are known
//! - `assemble`: a file from top to bottom

pub mod problem;

mod assemble;
mod channel;
mod crosscheck;
mod draft;
mod fit;
mod influence;
mod name;
mod place;
mod quantity;
pub(crate) mod reader;
mod reference;
mod screening;
mod service;
pub(crate) mod source;
mod steps;

use crate::payload::Tables;
use crate::record::Retention;
use holdtrue_engine::setup::Setup;
use std::path::PathBuf;
use std::time::Duration;

pub use assemble::{broker_at, from_text, load, settings};
pub use problem::{Problem, Problems, Severity};

/// Everything that one configuration file says, checked.
#[derive(Clone, Debug)]
pub struct Configuration {
    /// `[broker]`.
    pub broker: Broker,
    /// `[record]`.
    pub record: Record,
    /// `[page]`; inactive in this version.
    pub page: Option<Page>,
    /// The engine's part: node name, clock, fingerprint, references and channels.
    pub setup: Setup,
    /// Which topics are subscribed to and what each of them carries.
    pub intake: Tables,
    /// What is allowed but probably not meant.
    pub warnings: Vec<Problem>,
}

/// The link to the broker.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Broker {
    /// Host name or address, IPv6 without brackets.
    pub host: String,
    /// TCP port.
    pub port: u16,
    /// `Some` with `mqtts://`.
    pub tls: Option<Tls>,
    /// MQTT 5 or 3.1.1.
    pub protocol: Protocol,
    /// The session belongs to this name; two daemons must not share one.
    pub client_id: String,
    /// User name and password, if the broker wants them.
    pub login: Option<Login>,
    /// Keep-alive interval, at least 5 s.
    pub keep_alive: Duration,
    /// How long the broker keeps the session and its queue while we are away.
    pub session_expiry: Duration,
    /// How many unacknowledged messages the broker may send.
    pub receive_maximum: u16,
    /// Largest MQTT packet accepted, bytes.
    pub max_packet: u32,
}

/// Encryption of the link.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Tls {
    /// Certificates (PEM) that the broker's certificate must descend from.
    pub ca_file: PathBuf,
    /// Our own certificate and key (PEM), if the broker asks for one.
    pub client: Option<ClientCertificate>,
}

/// A client certificate with its key.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct ClientCertificate {
    /// Certificate chain, PEM.
    pub certificate: PathBuf,
    /// Private key, PEM (PKCS #8 or SEC 1).
    pub key: PathBuf,
}

/// User name and password.
#[derive(Clone, PartialEq, Eq)]
pub struct Login {
    /// User name.
    pub username: String,
    /// The first line of `password_file`.
    pub password: String,
}

impl std::fmt::Debug for Login {
    /// Never shows the password: configurations end up in logs.
    fn fmt(&self, out: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        out.debug_struct("Login")
            .field("username", &self.username)
            .finish_non_exhaustive()
    }
}

/// Version of the MQTT protocol.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Protocol {
    /// MQTT 5.0.
    V5,
    /// MQTT 3.1.1.
    V311,
}

/// Where inputs and outputs are kept.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Record {
    /// The folder, absolute or as seen from the working directory.
    pub folder: PathBuf,
    /// Longest time between two commits; corrections wait for it.
    pub commit: Duration,
    /// How much of it is kept.
    pub retention: Retention,
}

/// The status page. Accepted and checked, not served by this version.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Page {
    /// Address and port to listen on.
    pub listen: std::net::SocketAddr,
}
