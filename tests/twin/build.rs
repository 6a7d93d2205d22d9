//! Gives the image its memory map and linker script; does nothing for the library.

use std::{env, error::Error, fs, path::PathBuf};

fn main() -> Result<(), Box<dyn Error>> {
    println!("cargo:rerun-if-changed=memory.x");
    let cross = env::var("CARGO_CFG_TARGET_OS").is_ok_and(|os| os == "none");
    if env::var_os("CARGO_FEATURE_IMAGE").is_none() || !cross {
        return Ok(());
    }
    let out = PathBuf::from(env::var("OUT_DIR")?);
    fs::copy("memory.x", out.join("memory.x"))?;
    println!("cargo:rustc-link-search={}", out.display());
    for argument in ["--nmagic", "-Tlink.x"] {
        println!("cargo:rustc-link-arg-bins={argument}");
    }
    Ok(())
}
