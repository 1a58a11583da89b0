//! The scorecard: the engine alone, driven through a library of invented faults and measured
//! against their known truth.
//!
//! Truth is the systematic error of the sensor; noise is not for a correction to remove. Everything
//! a run does follows from the scenario's name and one seed.
//!
//! Reading order: what a run consists of ([`world`], [`chooser`], [`ground`]), which runs there are
//! ([`library`]), how one goes ([`stream`], [`consumer`], [`observe`], [`tally`], [`findings`],
//! [`trial`]), what many say ([`contest`], [`summary`], [`limits`], [`table`]). Beside them
//! stand studies of one thing each ([`study`]), over streams of their own ([`coverage`], [`steps`],
//! [`foresight`]).

pub mod chooser;
pub mod ground;
pub mod world;

pub mod library;

pub mod consumer;
pub mod findings;
pub mod observe;
pub mod stream;
pub mod tally;
pub mod trial;

pub mod contest;
pub mod limits;
pub mod rare;
pub mod summary;
pub mod table;

pub mod coverage;
pub mod foresight;
pub mod steps;
pub mod study;
