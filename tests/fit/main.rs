//! The fit and its degree, against algebra, certified values and real data: one file for each.

mod accuracy;
mod algebra;
mod certified;
mod degree_mean;
mod degree_resistor;
mod regressors;
mod support;
mod window;
