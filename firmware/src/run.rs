//! The station's main loop: from gauge, host, buttons and time to the recorder, and from it to the lamps.
//!
//! Everything that decides is in [`Recorder`]; everything that is wired is in the board's binary.

use core::cell::RefCell;

use donelight_core::{
    lamps::Lamps,
    plan::LineSettings,
    record::Millis,
    recorder::{Button, Recorder},
    wire::FRAME_MAX,
};
use embassy_futures::{
    join::join,
    select::{Either, select},
    yield_now,
};
use embedded_hal::digital::{InputPin, OutputPin};
use embedded_io_async::{Read, Write};
use embedded_storage::nor_flash::MultiwriteNorFlash;

use crate::{clock::Clock, panel::PushButton, ring::LineFault};

/// How often the recorder, the buttons and the lamps are looked after at least, in milliseconds.
const TICK_MS: u64 = 5;

/// How long the host may take to fetch an answer before the station gives it up; the host asks again.
const REPLY_WITHIN_MS: u64 = 500;

/// Bytes of the gauge taken at once.
const CHUNK: usize = 64;

/// The gauge's line. A pending `read` must lose nothing when it is dropped.
pub trait GaugePort: Read<Error = LineFault> {
    /// From now on bytes arrive by these settings.
    fn configure(&mut self, settings: LineSettings);
}

/// What restarts the station if [`run`] gets stuck.
pub trait Watchdog {
    /// The station is alive.
    fn feed(&mut self);
}

/// Lamps and buttons, each of its board's own type.
pub struct Panel<D, A, N, T, S> {
    /// The done lamp.
    pub done: D,
    /// The attention lamp.
    pub attention: A,
    /// The lamp that winks at each reading taken.
    pub taken: N,
    /// Takes the last reading back.
    pub take_back: PushButton<T>,
    /// The operator has seen what the station holds up.
    pub seen: PushButton<S>,
}

/// A [`Panel`], whatever its pins are.
pub trait Operator {
    /// Shows the lamps.
    fn show(&mut self, lamps: Lamps);

    /// The buttons pressed since the last look. Call it every few milliseconds.
    fn pressed(&mut self, now: Millis) -> [Option<Button>; 2];
}

impl<D: OutputPin, A: OutputPin, N: OutputPin, T: InputPin, S: InputPin> Operator for Panel<D, A, N, T, S> {
    fn show(&mut self, lamps: Lamps) {
        // A pin's error says nothing that could be acted upon.
        let _ = self.done.set_state(lamps.done.into());
        let _ = self.attention.set_state(lamps.attention.into());
        let _ = self.taken.set_state(lamps.taken.into());
    }

    fn pressed(&mut self, now: Millis) -> [Option<Button>; 2] {
        [
            self.take_back.pressed(now).then_some(Button::TakeBack),
            self.seen.pressed(now).then_some(Button::Seen),
        ]
    }
}

/// Runs the station for ever.
///
/// Two loops take turns on one recorder; neither holds it while it waits. A host that does not fetch its answers stops
/// only the second one.
pub async fn run<F: MultiwriteNorFlash>(
    recorder: Recorder<F>,
    gauge: impl GaugePort,
    (from_host, to_host): (impl Read, impl Write),
    panel: impl Operator,
    clock: impl Clock,
    watchdog: impl Watchdog,
) {
    let recorder = RefCell::new(recorder);
    let measuring = measure(&recorder, gauge, panel, clock, watchdog);
    let answering = answer(&recorder, from_host, to_host, clock);
    join(measuring, answering).await;
}

/// Gauge, buttons and time in; lamps and the gauge's line settings out.
async fn measure<F: MultiwriteNorFlash>(
    recorder: &RefCell<Recorder<F>>,
    mut gauge: impl GaugePort,
    mut panel: impl Operator,
    clock: impl Clock,
    mut watchdog: impl Watchdog,
) {
    let mut settings = recorder.borrow().line_settings();
    gauge.configure(settings);
    let mut chunk = [0; CHUNK];
    loop {
        let heard = select(gauge.read(&mut chunk), clock.pause(TICK_MS)).await;
        let now = clock.now();
        let mut recorder = recorder.borrow_mut();
        match heard {
            Either::First(Ok(length)) => recorder.gauge_bytes(now, chunk.get(..length).unwrap_or_default()),
            Either::First(Err(LineFault::Garbled)) => recorder.gauge_garbled(now),
            Either::First(Err(LineFault::Lapped(_) | LineFault::Overrun)) => recorder.gauge_overrun(now),
            Either::Second(()) => {}
        }
        for button in panel.pressed(now).into_iter().flatten() {
            recorder.press(now, button);
        }
        recorder.tick(now);
        panel.show(recorder.lamps(clock.now()));
        if settings != recorder.line_settings() {
            settings = recorder.line_settings();
            gauge.configure(settings);
        }
        watchdog.feed();
    }
}

/// Requests in, answers out.
async fn answer<F: MultiwriteNorFlash, C: Clock>(
    recorder: &RefCell<Recorder<F>>,
    mut from_host: impl Read,
    mut to_host: impl Write,
    clock: C,
) {
    let mut request = [0; 64];
    let mut reply = [0; FRAME_MAX];
    loop {
        let Ok(length) = from_host.read(&mut request).await else {
            clock.pause(TICK_MS).await;
            continue;
        };
        for byte in request.get(..length).unwrap_or_default() {
            let length = match recorder.borrow_mut().host_byte(clock.now(), *byte) {
                Some(frame) => {
                    reply.iter_mut().zip(frame).for_each(|(place, byte)| *place = *byte);
                    frame.len()
                }
                None => continue,
            };
            let sent = async {
                to_host.write_all(reply.get(..length).unwrap_or_default()).await?;
                to_host.flush().await
            };
            // Too late or not at all: the host asks again, and each frame begins with the byte that ends a torn one.
            let _ = select(sent, clock.pause(REPLY_WITHIN_MS)).await;
        }
        // A host that sends without a pause must not keep the gauge waiting.
        yield_now().await;
    }
}

/// Shows for ever that the station cannot work: the attention lamp blinks fast, the done lamp stays dark.
pub async fn show_failure(mut panel: impl Operator, clock: impl Clock, mut watchdog: impl Watchdog) {
    const HALF_PERIOD_MS: u64 = 100;
    let mut attention = false;
    loop {
        attention = !attention;
        panel.show(Lamps { attention, ..Lamps::default() });
        watchdog.feed();
        clock.pause(HALF_PERIOD_MS).await;
    }
}
