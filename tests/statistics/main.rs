//! What holds only on average: rates, powers and coverage, each over many seeded runs.

mod coverage;
mod degree_power;
mod false_raises;
mod forecast_coverage;
mod noise;
mod span_claims;
mod steps;
mod studies;
