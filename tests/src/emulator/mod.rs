//! A Raspberry Pi Pico that runs the station's real image, with a gauge, a host's USB port, lamps, buttons and a power
//! switch. Time stands still unless a method lets it pass.
//!
//! The emulator is the npm package rp2040js (MIT); `tests/emulator/` adds what it lacks and what a station is tied to.

mod controls;
pub mod event;
pub mod image;
pub mod log;
mod node;
pub mod sequence;
pub mod study;
#[cfg(unix)]
pub mod terminal;
mod usb;

use std::collections::VecDeque;
use std::time::{Duration, Instant};

use donelight_core::plan::{LineSettings, Parity};
use donelight_core::wire::StationId;
use serde_json::{Value, json};

pub use controls::{Button, Lamp, Moment};
pub use event::{Event, Operation, UsbIdentity, What};
use node::Node;

/// The unique number of the emulated flash chip.
pub const STATION: StationId = StationId([0xe6, 0x61, 0x38, 0x52, 0x83, 0x50, 0xa1, 0x2b]);

/// Where the journal begins and ends in the chip.
pub const JOURNAL: std::ops::Range<u32> = 0x10_0000..0x20_0000;

/// The board, and what is tied to it.
#[derive(Debug)]
pub struct Board {
    node: Node,
    now: u64,
    cycles: u64,
    powered: bool,
    events: Vec<Event>,
    from_usb: VecDeque<u8>,
    levels: [bool; 32],
    /// The log's bytes, one entry a power cycle.
    logs: Vec<Vec<u8>>,
    began: Instant,
    /// A reset by the image itself is looked for.
    may_reset: bool,
}

impl Board {
    /// A new board with an empty flash, switched on, its serial port opened by a host.
    ///
    /// # Panics
    /// If there is no image, or it does not start.
    #[must_use]
    #[track_caller]
    pub fn start() -> Self {
        let mut board = Self::new();
        board.power_on();
        board.connected();
        board
    }

    /// A new board with an empty flash, switched off.
    ///
    /// # Panics
    /// If there is no image, or no emulator.
    #[must_use]
    #[track_caller]
    pub fn new() -> Self {
        Self {
            node: Node::start(&image::path()),
            now: 0,
            cycles: 0,
            powered: false,
            events: Vec::new(),
            from_usb: VecDeque::new(),
            levels: [false; 32],
            logs: Vec::new(),
            began: Instant::now(),
            may_reset: false,
        }
    }

    // ---- power ----

    /// Switches it on.
    #[track_caller]
    pub fn power_on(&mut self) {
        self.logs.push(Vec::new());
        let number: String = STATION.to_string();
        self.command(json!({ "command": "powerOn", "unique_id": number }));
        self.powered = true;
    }

    /// Switches it off, between two instructions.
    #[track_caller]
    pub fn power_off(&mut self) {
        self.command(json!({ "command": "powerOff" }));
        self.went_dark();
    }

    /// Whether it has power.
    #[must_use]
    pub fn is_powered(&self) -> bool {
        self.powered
    }

    /// Lets the power fail at the `nth` operation of this kind from now.
    #[track_caller]
    pub fn cut_power_at(&mut self, nth: u32, operation: Operation, moment: Moment) {
        let on = match operation {
            Operation::Erase => "erase",
            Operation::Program => "program",
        };
        let (when, bytes, seed) = match moment {
            Moment::Before => ("before", 0, None),
            Moment::Inside { bytes, seed } => ("inside", bytes, seed),
            Moment::After => ("after", 0, None),
        };
        let mut command = json!({ "command": "cut", "on": on, "nth": nth, "when": when, "bytes": bytes });
        if let Some(seed) = seed {
            command["seed"] = seed.into();
        }
        self.command(command);
    }

    fn went_dark(&mut self) {
        self.powered = false;
        self.from_usb.clear();
        self.levels = [false; 32];
    }

    // ---- time ----

    /// Simulated time since the board was made.
    #[must_use]
    pub fn now(&self) -> Duration {
        Duration::from_nanos(self.now)
    }

    /// Cycles in which the core was not asleep.
    #[must_use]
    pub fn cycles(&self) -> u64 {
        self.cycles
    }

    /// Lets this much time pass; less if the power fails.
    #[track_caller]
    pub fn run(&mut self, time: Duration) {
        self.command(json!({ "command": "run", "nanos": nanos(time) }));
    }

    /// Lets time pass until an event is `wanted`, and gives it. `kinds` names the kinds that it can be of, so that the
    /// board stops right at it.
    ///
    /// # Panics
    /// If none comes within this time.
    #[track_caller]
    pub fn run_until(&mut self, kinds: &[&str], within: Duration, wanted: impl Fn(&Event) -> bool) -> Event {
        let end = self.now + nanos(within);
        loop {
            let from = self.events.len();
            let kinds: Vec<_> = kinds.iter().chain(&["power-lost"]).collect();
            self.command(json!({ "command": "run", "nanos": end - self.now, "until": kinds }));
            if let Some(event) = self.events[from..].iter().find(|event| wanted(event)) {
                return event.clone();
            }
            let last: Vec<_> = self.events.iter().rev().take(8).collect();
            assert!(
                self.powered && self.now < end,
                "{kinds:?} did not come within {within:?}; last: {last:#?}"
            );
        }
    }

    /// All that has happened so far.
    #[must_use]
    pub fn events(&self) -> &[Event] {
        &self.events
    }

    // ---- gauge ----

    /// The gauge begins to send these bytes, behind those that it has not yet sent.
    #[track_caller]
    pub fn gauge(&mut self, bytes: impl AsRef<[u8]>) {
        self.command(json!({ "command": "gauge", "hex": to_hex(bytes.as_ref()) }));
    }

    /// The gauge sends by these settings from its next byte on.
    #[track_caller]
    pub fn set_gauge(&mut self, line: LineSettings) {
        let parity = match line.parity {
            Parity::None => "none",
            Parity::Even => "even",
            Parity::Odd => "odd",
        };
        let line = json!({
            "baud": line.baud, "data_bits": line.data_bits, "parity": parity, "stop_bits": line.stop_bits,
        });
        self.command(json!({ "command": "gauge", "hex": "", "line": line }));
    }

    /// The gauge sends a line; time passes until the *taken* lamp tells the operator, and until its wink is over.
    /// Gives the moment at which it lit.
    ///
    /// # Panics
    /// If it does not light within two seconds.
    #[track_caller]
    pub fn measure(&mut self, reading: &str) -> Event {
        self.try_measure(reading).expect("power")
    }

    /// [`Board::measure`], or `None` if the power fails before the operator is told.
    ///
    /// # Panics
    /// If the lamp does not light within two seconds, with power.
    #[track_caller]
    pub fn try_measure(&mut self, reading: &str) -> Option<Event> {
        self.gauge(format!("{reading}\r\n"));
        let lit = What::Pin { pin: Lamp::Taken as u8, high: true };
        let lit_or_dark = |event: &Event| event.what == lit || event.what == What::PowerLost;
        let told = self.run_until(&["pin"], Duration::from_secs(2), lit_or_dark);
        if told.what == What::PowerLost {
            return None;
        }
        let dark = What::Pin { pin: Lamp::Taken as u8, high: false };
        self.run_until(&["pin"], Duration::from_secs(1), |event| {
            event.what == dark || event.what == What::PowerLost
        });
        Some(told)
    }

    // ---- lamps and buttons ----

    /// Whether a lamp is lit.
    #[must_use]
    pub fn is_lit(&self, lamp: Lamp) -> bool {
        self.levels[lamp as usize]
    }

    /// Lets time pass until a lamp is lit or dark.
    ///
    /// # Panics
    /// If that takes longer.
    #[track_caller]
    pub fn wait_for(&mut self, lamp: Lamp, lit: bool, within: Duration) -> Event {
        let what = What::Pin { pin: lamp as u8, high: lit };
        self.run_until(&["pin"], within, |event| event.what == what)
    }

    /// Presses a button for 100 ms, and lets 100 ms pass.
    #[track_caller]
    pub fn press(&mut self, button: Button) {
        for high in [false, true] {
            self.command(json!({ "command": "input", "pin": button as u8, "high": high }));
            self.run(Duration::from_millis(100));
        }
    }

    // ---- USB ----

    /// Lets time pass until the host has opened the serial port.
    ///
    /// # Panics
    /// If that takes more than two seconds.
    #[track_caller]
    pub fn connected(&mut self) -> UsbIdentity {
        let event = self.run_until(&["connected"], Duration::from_secs(2), |event| {
            matches!(event.what, What::Connected(_))
        });
        match event.what {
            What::Connected(identity) => identity,
            other => unreachable!("{other:?}"),
        }
    }

    /// Puts the cable in or pulls it.
    #[track_caller]
    pub fn plug(&mut self, plugged: bool) {
        self.from_usb.clear();
        self.command(json!({ "command": "cable", "plugged": plugged }));
    }

    /// Whether the host's program fetches what the board sends.
    #[track_caller]
    pub fn fetch(&mut self, fetching: bool) {
        self.command(json!({ "command": "cable", "fetching": fetching }));
    }

    /// Sends bytes to the serial port.
    #[track_caller]
    pub fn send(&mut self, bytes: &[u8]) {
        self.command(json!({ "command": "usb", "hex": to_hex(bytes) }));
    }

    /// Takes the bytes that have come from the serial port.
    pub fn take_received(&mut self) -> Vec<u8> {
        self.from_usb.drain(..).collect()
    }

    // ---- flash ----

    /// How long flash operations take from now on; at the start they take the chip's typical times.
    #[track_caller]
    pub fn set_flash_times(&mut self, sector_erase: Duration, page_program: Duration) {
        let (erase, program) = (sector_erase.as_micros() as u64, page_program.as_micros() as u64);
        self.command(
            json!({ "command": "flashTimes", "sector_erase_us": erase, "page_program_us": program }),
        );
    }

    /// What stands in the flash.
    #[track_caller]
    pub fn flash(&mut self, range: std::ops::Range<u32>) -> Vec<u8> {
        let length = range.end - range.start;
        let result =
            self.command(json!({ "command": "readFlash", "address": range.start, "length": length }));
        from_hex(result["hex"].as_str().expect("hexadecimal"))
    }

    /// Changes the flash behind the station's back.
    #[track_caller]
    pub fn damage_flash(&mut self, address: u32, bytes: &[u8]) {
        self.command(json!({ "command": "writeFlash", "address": address, "hex": to_hex(bytes) }));
    }

    // ---- inside ----

    /// The image goes no further from now on, as after a fault in it; interrupts are served.
    #[track_caller]
    pub fn hang(&mut self) {
        self.may_reset = true;
        self.command(json!({ "command": "hang" }));
    }

    /// The gauge's DMA transfer has only so many bytes left, as after days.
    #[track_caller]
    pub fn age_gauge_transfer(&mut self, left: u32) {
        self.command(json!({ "command": "ageTransfer", "channel": 0, "left": left }));
    }

    /// Bytes of stack that were ever written since the power came.
    #[track_caller]
    pub fn stack_used(&mut self) -> usize {
        let begin = image::size().variables_end;
        let length = image::RAM_END - begin;
        let result = self.command(json!({ "command": "readRam", "address": begin, "length": length }));
        let ram = from_hex(result["hex"].as_str().expect("hexadecimal"));
        ram.len() - ram.iter().position(|byte| *byte != 0).unwrap_or(ram.len())
    }

    /// The settings that the image has given its UART.
    #[track_caller]
    pub fn line(&mut self) -> Value {
        self.command(json!({ "command": "state" }))["line"].clone()
    }

    /// The log of each power cycle.
    ///
    /// # Panics
    /// If it does not belong to the image.
    #[must_use]
    pub fn logs(&self) -> Vec<Vec<String>> {
        let image = std::fs::read(image::path()).expect("the image can be read");
        self.logs.iter().map(|bytes| log::lines(&image, bytes)).collect()
    }

    #[track_caller]
    fn command(&mut self, command: Value) -> Value {
        let answer = self.node.command(&command);
        (self.now, self.cycles) = (answer.now, answer.cycles);
        for event in answer.events {
            self.note(&event.what);
            self.events.push(event);
        }
        answer.result
    }

    #[track_caller]
    fn note(&mut self, what: &What) {
        match what {
            What::Pin { pin, high } => self.levels[usize::from(*pin)] = *high,
            What::Usb { hex } => self.from_usb.extend(from_hex(hex)),
            What::Log { hex } => self.logs.last_mut().expect("power").extend(from_hex(hex)),
            What::PowerLost => self.went_dark(),
            What::Reset { cause } => {
                assert!(self.may_reset, "the station was reset by its {cause}; its log: {:?}", self.logs());
                self.logs.push(Vec::new());
            }
            What::EmulatorWarning { message } => {
                panic!("the image does what the emulator does not know: {message}")
            }
            _ => {}
        }
    }
}

impl Default for Board {
    fn default() -> Self {
        Self::new()
    }
}

fn nanos(time: Duration) -> u64 {
    u64::try_from(time.as_nanos()).expect("less than five hundred years")
}

fn to_hex(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02x}")).collect()
}

fn from_hex(hex: &str) -> Vec<u8> {
    let digits = |at| u8::from_str_radix(&hex[at..at + 2], 16).expect("hexadecimal");
    (0..hex.len()).step_by(2).map(digits).collect()
}
