//! The command `donelight`. All of it is in the library; see [`donelight::run`].
#![forbid(unsafe_code)]

fn main() -> std::process::ExitCode {
    donelight::run(std::env::args_os())
}
