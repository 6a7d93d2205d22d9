//! A Python with SciPy in a virtual environment of its own under the target folder, and questions to it.

use std::io::{BufRead, BufReader, Write};
use std::path::{Path, PathBuf};
use std::process::{Child, ChildStdin, ChildStdout, Command, Stdio};

use serde_json::Value;

const SOURCES: &str = concat!(env!("CARGO_MANIFEST_DIR"), "/benches/scipy");

/// The running `peer.py`.
pub(crate) struct Peer {
    child: Child,
    to: ChildStdin,
    from: BufReader<ChildStdout>,
}

impl Peer {
    /// Makes the environment, if it is not there, and starts the script.
    ///
    /// # Errors
    /// What is missing, in words.
    pub(crate) fn start() -> Result<Self, String> {
        let python = environment()?;
        let mut child = Command::new(python)
            .arg(Path::new(SOURCES).join("peer.py"))
            .env("PYTHONDONTWRITEBYTECODE", "1")
            // One thread, as the other side has.
            .env("OPENBLAS_NUM_THREADS", "1")
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .spawn()
            .map_err(|error| format!("its Python does not start: {error}"))?;
        let (to, from) = child.stdin.take().zip(child.stdout.take()).expect("both are piped");
        Ok(Self { child, to, from: BufReader::new(from) })
    }

    /// Asks and waits.
    ///
    /// # Panics
    /// If the script ends or answers no JSON: then the comparison is broken.
    pub(crate) fn ask(&mut self, question: &Value) -> Value {
        writeln!(self.to, "{question}").expect("peer.py listens");
        let mut line = String::new();
        self.from.read_line(&mut line).expect("peer.py answers");
        serde_json::from_str(&line).expect("peer.py answers in JSON; see above for its error")
    }
}

impl Drop for Peer {
    fn drop(&mut self) {
        // It ends by itself when its input does; if it hangs, the bench must not.
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

/// The environment's Python, with SciPy in it.
fn environment() -> Result<PathBuf, String> {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("scipy");
    let python = folder.join(if cfg!(windows) { "Scripts/python.exe" } else { "bin/python" });
    let imports = ["-c", "import gmpy2, mpmath, numpy, scipy.stats"];
    if python.exists() && run(Command::new(&python).args(imports)).is_ok() {
        return Ok(python);
    }
    let host = if cfg!(windows) { "python" } else { "python3" };
    run(Command::new(host).args(["-m", "venv"]).arg(&folder))
        .map_err(|error| format!("it needs Python 3 with venv and pip: {error}"))?;
    let requirements = Path::new(SOURCES).join("requirements.txt");
    let install = ["-m", "pip", "install", "--quiet", "--disable-pip-version-check", "--requirement"];
    run(Command::new(&python).args(install).arg(requirements))
        .map_err(|error| format!("pip cannot install SciPy: {error}"))?;
    run(Command::new(&python).args(imports)).map_err(|error| format!("SciPy does not start: {error}"))?;
    Ok(python)
}

/// Runs to the end; the last line of its errors otherwise.
fn run(command: &mut Command) -> Result<(), String> {
    let output = command.output().map_err(|error| error.to_string())?;
    if output.status.success() {
        return Ok(());
    }
    let errors = String::from_utf8_lossy(&output.stderr);
    Err(errors.lines().last().unwrap_or("it fails without a word").to_owned())
}
