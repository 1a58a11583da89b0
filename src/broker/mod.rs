//! The link to the broker: one persistent MQTT session that outlives connections and restarts.
//!
//! What it promises: a message is acknowledged when it is told to and not before, in the order of
//! arrival; a document counts as delivered only when the broker said so; a lost connection is made
//! again with growing pauses. What it leaves to its user: which documents still have to go after a
//! loss, since only the record knows.
//!
//! Modules in reading order:
//! - `traffic`: what passes over the link
//! - `link`: the session across connections
//! - `client`: the differences between MQTT 5.0 and 3.1.1
//! - `back_off`: pauses between attempts
//! - `tls`: encryption

mod back_off;
mod client;
mod link;
mod tls;
mod traffic;

pub use back_off::BackOff;
pub use client::Answer;
pub use link::Link;
pub use tls::TlsError;
pub use traffic::{Event, Lost, Message, Publish, Ticket, Token, Will};
