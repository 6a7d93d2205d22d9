//! The bench as an image for a Cortex-M0 with semihosting: sequences on standard input, their digests on standard output.
//!
//! In: the length of a sequence (u16, little endian) and its bytes, again and again until the input ends. Out: eight bytes for
//! each, its digest, little endian; zeros if it is no sequence.
#![no_std]
#![no_main]

use cortex_m_rt::entry;
use donelight_twin::{Memory, SEQUENCE_MAX, run};
use semihosting::{
    io::{Read, Write, stdin, stdout},
    process,
};

#[entry]
fn main() -> ! {
    process::exit(match serve() {
        Ok(()) => 0,
        Err(_) => 1,
    })
}

fn serve() -> semihosting::io::Result<()> {
    let (mut from, mut to) = (stdin()?, stdout()?);
    let memory = Memory::blank();
    let mut sequence = [0; SEQUENCE_MAX];
    loop {
        let mut length = [0; 2];
        if from.read(&mut length[..1])? == 0 {
            return Ok(());
        }
        from.read_exact(&mut length[1..])?;
        let Some(sequence) = sequence.get_mut(..u16::from_le_bytes(length).into()) else { process::exit(2) };
        from.read_exact(sequence)?;
        let digest = run(&memory, sequence).map_or(0, |digest| digest.value());
        to.write_all(&digest.to_le_bytes())?;
    }
}
