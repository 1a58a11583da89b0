//! What the benchmark of the fit compares: an irregular stream, the outputs wanted at every row,
//! and the peers.

mod cholesky;
mod outputs;
mod qr;
mod stream;

pub use cholesky::Cholesky;
pub use outputs::{DEGREES, Outputs, outputs};
pub use qr::batch_qr;
pub use stream::Stream;
