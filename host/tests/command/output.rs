//! Help, usage errors, JSON errors, a reader that goes away, and a standard output that is full.

use std::process::{Command, Stdio};

use crate::driver::donelight;

#[test]
fn every_command_helps_with_what_it_takes() {
    for (command, words) in [
        ("", "size plan station virtual assess report demo --json"),
        ("size precision", "--index --at --within --confidence --kind Examples:"),
        ("size power", "--claim --against --alpha --power Examples:"),
        ("plan new", "--force Examples:"),
        ("plan check", "--studies --seed Examples:"),
        ("station", "list status load pull clock blink"),
        ("station pull", "--ledger --port"),
        ("virtual", "--store --process --feed --seed --rate"),
        (
            "assess",
            "--lsl --usl --target --resolution --index --confidence --kind --summary --report --require Examples:",
        ),
        ("report", "--ledger --output --csv --json Examples:"),
        ("demo", "--out"),
    ] {
        let help = donelight(&format!("{command} --help")).ends_with(0).out;
        for word in words.split(' ') {
            assert!(help.contains(word), "{command}: {word} is not in\n{help}");
        }
    }
}

#[test]
fn wrong_use_is_told_in_json_too_when_json_is_asked_for() {
    let answer = donelight("size precision --at none --within 10% --json").ends_with(2);
    let error = &answer.json()["error"];
    assert_eq!(error["kind"], "usage");
    assert!(
        error["message"].as_str().unwrap().contains("invalid value 'none' for '--at <INDEX>'"),
        "{error}"
    );
    assert!(answer.err.contains("invalid value 'none'"));
}

#[test]
fn a_reader_that_goes_away_is_no_trouble() {
    let (reader, writer) = std::io::pipe().unwrap();
    drop(reader);
    let output = Command::new(env!("CARGO_BIN_EXE_donelight"))
        .args(["size", "precision", "--at", "1.5", "--within", "10%"])
        .stdout(writer)
        .stderr(Stdio::piped())
        .output()
        .unwrap();
    assert_eq!(output.status.code(), Some(0));
    assert!(output.stderr.is_empty(), "{}", String::from_utf8_lossy(&output.stderr));
}

#[cfg(target_os = "linux")]
#[test]
fn an_answer_that_cannot_be_written_is_a_failure() {
    let full = std::fs::OpenOptions::new().write(true).open("/dev/full").unwrap();
    let output = Command::new(env!("CARGO_BIN_EXE_donelight"))
        .args(["size", "precision", "--at", "1.5", "--within", "10%"])
        .stdout(full)
        .stderr(Stdio::piped())
        .output()
        .unwrap();
    assert_eq!(output.status.code(), Some(1));
    let message = String::from_utf8(output.stderr).unwrap();
    assert!(message.contains("could not be written"), "{message}");
}
