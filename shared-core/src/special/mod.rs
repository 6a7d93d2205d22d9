//! Distribution functions, on `libm` alone, so that device and host agree bit for bit.

pub mod normal;
