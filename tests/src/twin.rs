//! The twin's image on a Cortex-M0: sequences in, digests out. By default on this workspace's own emulated core, which needs
//! nothing installed and executes some 250 million instructions a second; by QEMU (`apt-get install qemu-system-arm`), which
//! translates them and makes 600 million, where [`QEMU_VARIABLE`] asks for it.

use std::io::Write;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::thread;

use donelight_cortex_m0::{End, Program};
use donelight_twin::Steps;

/// Names the twin's ELF file; `tests/run` builds it and sets this.
pub const IMAGE_VARIABLE: &str = "DONELIGHT_TWIN_ELF";
/// If it is 1, QEMU executes the image.
pub const QEMU_VARIABLE: &str = "DONELIGHT_QEMU";

/// No sequence takes so many instructions: the longest take some hundred million.
const INSTRUCTIONS_MAX: u64 = 20_000_000_000;

/// The image, ready to run.
#[derive(Debug)]
pub enum Twin {
    /// On this workspace's emulated core.
    Here(Box<Program>),
    /// By a program with these arguments, which the image's path follows.
    By(Vec<String>),
}

/// The image's ELF file.
///
/// # Panics
/// If [`IMAGE_VARIABLE`] does not name one.
#[must_use]
pub fn path() -> PathBuf {
    let path = std::env::var_os(IMAGE_VARIABLE).map(PathBuf::from);
    let path = path.unwrap_or_else(|| panic!("{IMAGE_VARIABLE} names no image: run tests/run"));
    assert!(path.is_file(), "{IMAGE_VARIABLE}: no file {}", path.display());
    path
}

impl Twin {
    /// Loads it.
    ///
    /// # Panics
    /// If there is none.
    #[must_use]
    pub fn load() -> Self {
        if std::env::var_os(QEMU_VARIABLE).is_some_and(|value| value == "1") {
            Self::qemu()
        } else {
            Self::here()
        }
    }

    /// On this workspace's emulated core.
    ///
    /// # Panics
    /// If there is no image.
    #[must_use]
    pub fn here() -> Self {
        Self::Here(Box::new(Program::load(&path())))
    }

    /// By QEMU, as a Cortex-M3, which knows all instructions of the M0: QEMU's boards with an M0 have too little memory.
    #[must_use]
    pub fn qemu() -> Self {
        let arguments = "qemu-system-arm -machine mps2-an385 -display none -monitor none -serial none \
                         -semihosting-config enable=on,target=native -kernel";
        Self::By(arguments.split_whitespace().map(String::from).collect())
    }

    /// On the core of rp2040js, which the emulated board runs on too.
    ///
    /// # Panics
    /// If it is not installed.
    #[must_use]
    pub fn rp2040js() -> Self {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("emulator");
        assert!(folder.join("node_modules").is_dir(), "the emulator is not installed: run tests/run");
        let program = folder.join("program.mjs");
        Self::By(vec!["node".into(), program.to_str().expect("a path in UTF-8").into()])
    }

    /// The digests of these sequences.
    ///
    /// # Panics
    /// If the image does not come to the end of one.
    #[track_caller]
    pub fn digests(&mut self, sequences: &[Vec<u8>]) -> Vec<u64> {
        let bytes = match self {
            Self::Here(program) => here(program, sequences),
            Self::By(arguments) => by(arguments, sequences),
        };
        let (digests, rest) = bytes.as_chunks::<8>();
        assert!(rest.is_empty() && digests.len() == sequences.len(), "{} digests", digests.len());
        digests.iter().map(|digest| u64::from_le_bytes(*digest)).collect()
    }

    /// The number of the first step from which on the digest is not the host's, counted from 1; 0 if it is from the start, `None`
    /// if it never is.
    #[track_caller]
    pub fn first_difference(&mut self, sequence: &[u8]) -> Option<usize> {
        let memory = donelight_twin::Memory::blank();
        let mut steps = Steps(sequence);
        let ends = std::iter::once(0)
            .chain(std::iter::from_fn(|| steps.next().map(|_| sequence.len() - steps.0.len())));
        ends.map(|end| sequence[..end].to_vec()).position(|begun| {
            let here = donelight_twin::run(&memory, &begun).expect("a sequence").value();
            self.digests(&[begun]) != [here]
        })
    }
}

/// A sequence with its length, as the image reads it.
fn framed(sequence: &[u8]) -> Vec<u8> {
    let length = u16::try_from(sequence.len()).expect("a sequence of bounded length");
    [&length.to_le_bytes(), sequence].concat()
}

#[track_caller]
fn here(program: &mut Program, sequences: &[Vec<u8>]) -> Vec<u8> {
    for sequence in sequences {
        program.give(&framed(sequence));
        let end = program.run(INSTRUCTIONS_MAX);
        let (said, address) = (program.said(), program.address());
        assert_eq!(end, End::WantsInput, "at {address:#x}; it said: {said}");
    }
    program.take()
}

#[track_caller]
fn by(arguments: &[String], sequences: &[Vec<u8>]) -> Vec<u8> {
    let (program, arguments) = arguments.split_first().expect("a program");
    let mut child = Command::new(program)
        .args(arguments)
        .arg(path())
        .stdin(Stdio::piped())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap_or_else(|error| panic!("{program} does not start: {error}"));
    let mut stdin = child.stdin.take().expect("piped");
    let input: Vec<u8> = sequences.iter().flat_map(|sequence| framed(sequence)).collect();
    let writer = thread::spawn(move || stdin.write_all(&input));
    let output = child.wait_with_output().expect("it ends");
    writer.join().expect("no panic").expect("it reads its input");
    assert!(output.status.success(), "the image ended with {}", output.status);
    output.stdout
}
