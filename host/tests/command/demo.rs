//! `donelight demo`, run without a terminal.

use std::fs;
use std::path::Path;

use crate::driver::run;

const FILES: [&str; 3] = ["plan.toml", "ledger.sqlite", "report.html"];

#[test]
fn the_demo_leaves_its_three_files_in_a_new_folder_and_names_them_at_the_end() {
    let here = tempfile::tempdir().unwrap();
    let said = run(&["demo"], here.path()).ends_with(0);
    for name in FILES {
        let path = Path::new("donelight-demo").join(name);
        assert!(here.path().join(&path).is_file(), "{name}");
        assert!(said.out.contains(path.to_str().unwrap()), "{}", said.out);
    }
    let again = run(&["demo"], here.path()).ends_with(0);
    assert!(again.out.contains("donelight-demo-2"), "{}", again.out);
    run(&["plan", "check", "donelight-demo/plan.toml"], here.path()).ends_with(0);
}

#[test]
fn the_demos_answer_agrees_with_the_report_on_its_ledger_bit_for_bit() {
    let here = tempfile::tempdir().unwrap();
    let demo = run(&["demo", "--out", "deep/demo", "--json"], here.path()).ends_with(0).json();
    let ledger = demo["ledger"].as_str().unwrap();
    let report = run(&["report", "--ledger", ledger, "--json"], here.path()).ends_with(0).json();
    for what in ["n", "estimate", "low", "high", "standing", "study"] {
        assert_eq!(demo[what], report[what], "{what}");
    }
    assert_eq!(demo["standing"], "settled");
    assert_eq!(demo["refused"], 2);
    assert_eq!(demo["power_cut"]["before"], demo["power_cut"]["after"]);
    let page = fs::read_to_string(here.path().join(demo["report"].as_str().unwrap())).unwrap();
    assert!(page.contains("Tower clock arbors"));
    let whats: Vec<_> = report["incidents"].as_array().unwrap().iter().map(|i| &i["what"]).collect();
    assert_eq!(whats.len(), 3, "the refused line, the restart and the write cut off: {whats:?}");
}

#[test]
fn the_demo_runs_again_in_its_own_folder_but_not_over_other_files() {
    let here = tempfile::tempdir().unwrap();
    run(&["demo", "--out", "demo"], here.path()).ends_with(0);
    run(&["demo", "--out", "demo"], here.path()).ends_with(0);
    fs::write(here.path().join("demo/plan.toml"), "# mine now\n").unwrap();
    let before = fs::read(here.path().join("demo/ledger.sqlite")).unwrap();
    let said = run(&["demo", "--out", "demo", "--json"], here.path()).ends_with(1);
    assert_eq!(said.json()["error"]["kind"], "file-exists");
    assert_eq!(fs::read(here.path().join("demo/ledger.sqlite")).unwrap(), before);
    assert_eq!(fs::read(here.path().join("demo/plan.toml")).unwrap(), b"# mine now\n");
}

#[test]
fn a_folder_that_cannot_be_made_is_an_error_that_says_what_to_do() {
    let here = tempfile::tempdir().unwrap();
    fs::write(here.path().join("file"), "").unwrap();
    let said = run(&["demo", "--out", "file/demo"], here.path()).ends_with(1);
    assert!(said.err.contains("file/demo") && said.err.contains("--out"), "{}", said.err);
}

#[cfg(target_os = "linux")]
#[test]
fn a_folder_whose_name_is_no_text_is_served_all_the_same() {
    use std::os::unix::ffi::OsStrExt;

    let here = tempfile::tempdir().unwrap();
    let name = std::ffi::OsStr::from_bytes(b"d\xffmo");
    let output = std::process::Command::new(env!("CARGO_BIN_EXE_donelight"))
        .args(["demo", "--json", "--out"])
        .arg(name)
        .current_dir(here.path())
        .output()
        .unwrap();
    assert!(output.status.success(), "{output:?}");
    assert!(here.path().join(name).join("report.html").is_file());
}
