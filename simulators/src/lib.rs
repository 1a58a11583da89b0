//! Invented plants with known truth.
