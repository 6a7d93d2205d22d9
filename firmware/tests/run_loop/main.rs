//! The station's loop on pins, pipes and flash in memory.

mod bench;

use bench::Bench;
use donelight_core::capability::Index;
use donelight_core::interval::{Kind, Method};
use donelight_core::plan::{Draft, LineSettings, Parity, Plan};
use donelight_core::quantity::{Confidence, Count, Millionths, Precision};
use donelight_core::record::Refusal;
use donelight_core::sigma::Sigma;
use donelight_core::stopping::{Goal, StoppingRule};
use donelight_core::text::Text;
use donelight_core::wire::{Reply, Request};
use donelight_firmware::ring::LineFault;

/// Three pieces of an even process are enough.
fn plan(gauge: LineSettings) -> Plan {
    let count = |n| Count::new(n).unwrap();
    Plan::try_from(Draft {
        name: Text::new("Clapper pins").unwrap(),
        part: Text::default(),
        characteristic: Text::default(),
        unit: Text::new("mm").unwrap(),
        resolution: "0.01".parse().unwrap(),
        lower: Some("4.9".parse().unwrap()),
        upper: Some("5.1".parse().unwrap()),
        target: None,
        index: Index::Cpk,
        confidence: Confidence::NINETY_FIVE_PERCENT,
        kind: Kind::TwoSided,
        rule: StoppingRule {
            planned: count(3),
            goal: Goal::Precision(Precision::Relative(Millionths(1_100_000))),
            limit: count(10),
        },
        gauge,
        same_in_a_row: 0,
        sigma: Sigma::Overall,
        method: Method::Bissell,
    })
    .unwrap()
}

fn bench_with_plan() -> Bench {
    let mut bench = Bench::start();
    bench.load(plan(LineSettings::default()));
    bench
}

fn pieces(bench: &mut Bench) -> u32 {
    bench.status().study.expect("a study").progress.n.get()
}

#[test]
fn each_reading_is_told_and_the_done_lamp_lights_at_the_last_one() {
    let mut bench = bench_with_plan();
    for (index, line) in ["5.00 mm", "5.01", "4.99"].iter().enumerate() {
        assert!(!bench.done.is_on(), "lit after {index} readings");
        assert!(bench.measure(line));
    }
    assert!(bench.done.is_on());
    assert!(!bench.attention.is_on());
    assert_eq!(pieces(&mut bench), 3);
}

#[test]
fn a_garbled_byte_spoils_its_line_and_is_told_as_such() {
    let mut bench = bench_with_plan();
    bench.fault(LineFault::Garbled);
    assert!(!bench.measure("5.00"));
    assert_eq!(bench.status().last_refusal, Some(Refusal::GaugeGarbled));
    assert!(bench.measure("5.01"));
}

#[test]
fn lost_bytes_spoil_the_line_under_way_and_are_told_as_such() {
    let mut bench = bench_with_plan();
    bench.fault(LineFault::Overrun);
    assert!(!bench.measure("5.00"), "the rest of a line is no reading");
    let status = bench.status();
    assert_eq!((status.refused, status.last_refusal), (0, Some(Refusal::GaugeOverrun)));
    assert!(bench.measure("5.01"));
    bench.pass(1_000);
    assert_eq!(bench.status().refused, 1);
    assert_eq!(pieces(&mut bench), 1);
}

#[test]
fn a_plan_sets_the_gauges_line() {
    let mut bench = Bench::start();
    assert_eq!(bench.line(), Some(LineSettings::default()));
    let other = LineSettings { baud: 4800, data_bits: 7, parity: Parity::Odd, stop_bits: 2 };
    bench.load(plan(other));
    assert_eq!(bench.line(), Some(other));
}

#[test]
fn a_press_takes_the_last_reading_back_once() {
    let mut bench = bench_with_plan();
    assert!(bench.measure("5.00"));
    assert!(bench.measure("5.05"));
    bench.take_back.set(false);
    bench.pass(500);
    bench.take_back.set(true);
    bench.pass(500);
    assert_eq!(pieces(&mut bench), 1);
}

#[test]
fn a_host_that_fetches_nothing_delays_neither_readings_nor_the_next_host() {
    let mut bench = bench_with_plan();
    bench.fetch(false);
    for _ in 0..3 {
        bench.send(&Request::Hello);
    }
    assert!(bench.measure("5.00"));
    assert!(bench.measure("5.01"));
    assert!(bench.measure("4.99"));
    assert!(bench.done.is_on());
    assert!(bench.longest_unfed() <= 10, "{} ms", bench.longest_unfed());
    bench.pass(2_000);
    bench.fetch(true);
    bench.send(&Request::Hello);
    assert_eq!(bench.answer(|reply| matches!(reply, Reply::Hello(_))), Some(true));
}

#[test]
fn a_host_that_sends_rubbish_for_a_minute_delays_neither_readings_nor_the_next_host() {
    let mut bench = bench_with_plan();
    bench.flood(true);
    for line in ["5.00", "5.01", "4.99"] {
        assert!(bench.measure(line));
        bench.pass(20_000);
    }
    assert!(bench.done.is_on());
    assert!(bench.longest_unfed() <= 10, "{} ms", bench.longest_unfed());
    bench.flood(false);
    bench.send(&Request::Hello);
    assert_eq!(bench.answer(|reply| matches!(reply, Reply::Hello(_))), Some(true));
    assert_eq!(pieces(&mut bench), 3);
}

#[test]
fn the_watchdog_is_fed_every_few_milliseconds_whatever_happens() {
    let mut bench = bench_with_plan();
    for _ in 0..5 {
        let _ = bench.measure("rubbish");
        bench.fault(LineFault::Lapped(9_000));
    }
    bench.pass(5_000);
    assert!(bench.longest_unfed() <= 10, "{} ms", bench.longest_unfed());
}
