//! Published op-amp networks as data, and the engine that turns a netlist into its transfer function.

mod library;
mod netlist;
mod nodal;
mod numeric;
mod polynomial;
mod traits;

pub use library::{find, library};
pub use netlist::{Circuit, CircuitError, Need, OpAmp, Output, SensibleQ, Slot, Term};
pub use nodal::Transfer;
pub use numeric::response;
pub(crate) use numeric::solve;
pub use polynomial::Polynomial;
pub use traits::SlotEffect;
