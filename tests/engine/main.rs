//! The engine through its one door, `Engine::step`: one file per behaviour.

mod alarms;
mod clocks;
mod fail_safe_ladder;
mod memory;
mod order;
mod outlook;
mod publishing;
mod purity;
mod quarantine;
mod random;
mod reference_judged;
mod scenarios;
mod screening;
mod service;
mod setup;
mod span_published;
mod state_parts;
mod steps;
mod stream;
mod support;
