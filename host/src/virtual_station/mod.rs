//! A station without hardware: the station's own code, its flash in a file and its gauge simulated.

pub mod flash;
pub mod store;
