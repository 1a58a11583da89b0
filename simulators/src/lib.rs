//! Invented plants with known truth.
//!
//! Everything a scenario does follows from its table entry and one seed: the true value, the
//! sensor's error, the noise, the faults and the alarms that each fault must raise. The same seed
//! gives the same bytes.
//!
//! Reading order: what exists ([`instrument`], [`behaviour`], [`scenario`]), how it runs
//! ([`noise`], [`process`], [`sensor`], [`plant`]), what is said about it ([`truth`],
//! [`configuration`], [`message`]), and where it goes ([`mod@write`], [`feed`], [`broker`]);
//! [`score`] drives the engine through a library of invented faults and measures it against their
//! truth; [`command`] is the command line over all of it.

pub mod instrument;
pub mod range;

pub mod behaviour;
pub mod scenario;

pub mod noise;
pub mod plant;
pub mod process;
pub mod sensor;

pub mod configuration;
pub mod message;
pub mod truth;

pub mod broker;
pub mod feed;
pub mod write;

pub mod score;

pub mod command;
