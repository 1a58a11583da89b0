//! What the benchmark of the fit compares: an irregular stream, the outputs wanted at every row,
//! and the peers; a whole channel beside its fit alone; and a fleet's plain readings.

mod channel;
mod cholesky;
mod fleet;
mod outputs;
mod qr;
mod stream;

pub use channel::{Case, Peers};
pub use cholesky::Cholesky;
pub use fleet::{Fleet, Running};
pub use outputs::{DEGREES, Outputs, outputs};
pub use qr::batch_qr;
pub use stream::Stream;
