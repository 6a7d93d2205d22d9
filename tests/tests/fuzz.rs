//! Every decoder that meets bytes from outside, under mutated valid bytes. `DONELIGHT_LONG=1` with `--release` runs the long
//! form.

use donelight_tests::fuzz::{Decoder, INPUT_VARIABLE, corpus, decoders};
use donelight_tests::sequences::is_long;

/// So much more than before may the process have needed at its highest.
const GROWTH_MAX_KIB: u64 = 256 * 1024;

/// The one input that is asked for.
fn asked() -> Option<(String, u64)> {
    let asked = std::env::var(INPUT_VARIABLE).ok()?;
    let (name, number) = asked.split_once(':').expect("<decoder>:<number>");
    Some((name.to_owned(), number.parse().expect("<decoder>:<number>")))
}

fn numbers(decoder: &Decoder) -> std::ops::Range<u64> {
    match asked() {
        Some((name, number)) if name == decoder.name => number..number + 1,
        Some(_) => 0..0,
        None => 0..if is_long() { decoder.long } else { decoder.short },
    }
}

/// The most memory that this process ever held, in KiB, where the system tells.
fn peak_kib() -> Option<u64> {
    let status = std::fs::read_to_string("/proc/self/status").ok()?;
    let line = status.lines().find(|line| line.starts_with("VmHWM:"))?;
    line.split_whitespace().nth(1)?.parse().ok()
}

#[test]
fn no_bytes_make_a_decoder_panic_hang_or_need_memory_without_a_bound() {
    let before = peak_kib();
    let (mut inputs, mut failures) = (0, Vec::new());
    for decoder in decoders() {
        let name = decoder.name;
        let began = std::time::Instant::now();
        match decoder.run(numbers(&decoder)) {
            Ok(outcome) => {
                inputs += outcome.inputs;
                println!(
                    "{name}: {} inputs, {} taken, {:.1} s, the slowest {:.3} s",
                    outcome.inputs,
                    outcome.taken,
                    began.elapsed().as_secs_f64(),
                    outcome.slowest.as_secs_f64()
                );
                if asked().is_none() {
                    assert!(outcome.taken > 0 && outcome.taken < outcome.inputs, "{name}: {outcome:?}");
                }
            }
            Err(failure) => {
                let file = std::env::temp_dir().join(format!("{name}-{}", failure.number));
                let _ = std::fs::write(&file, &failure.input);
                let shown = failure.input.escape_ascii().to_string();
                failures.push(format!(
                    "{INPUT_VARIABLE}={name}:{} {}\n  {} bytes, in {}: {:.300}",
                    failure.number,
                    failure.what,
                    failure.input.len(),
                    file.display(),
                    shown
                ));
            }
        }
    }
    println!("{inputs} inputs together, {:?} KiB at the highest, {before:?} before", peak_kib());
    assert!(failures.is_empty(), "{}", failures.join("\n"));
    if let (Some(before), Some(peak)) = (before, peak_kib()) {
        assert!(peak - before < GROWTH_MAX_KIB, "{before} KiB before, {peak} KiB at the highest");
    }
}

#[test]
fn what_was_kept_from_earlier_runs_is_taken_or_refused_in_peace() {
    let mut files = 0;
    for decoder in decoders() {
        for (path, bytes) in corpus(decoder.name) {
            decoder.feed_whole(&bytes).unwrap_or_else(|what| panic!("{}: {what}", path.display()));
            files += 1;
        }
    }
    assert!(files > 0, "the corpus is there");
}
