//! The simulators and the demo: plants invented with known truth, and the scorecard.

mod behaviours;
mod broker;
mod demo;
mod score;
mod writes;
