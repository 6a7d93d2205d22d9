//! A station's loop on pins, pipes and flash in memory, with a clock that is moved by hand.

use std::cell::{Cell, RefCell};
use std::collections::VecDeque;
use std::convert::Infallible;
use std::future::{Future, poll_fn};
use std::pin::Pin;
use std::rc::Rc;
use std::task::{Context, Poll, Waker};

use donelight_core::plan::{LineSettings, Plan};
use donelight_core::record::Millis;
use donelight_core::recorder::Recorder;
use donelight_core::text::Text;
use donelight_core::wire::{FRAME_MAX, FrameReader, Reply, Request, StationId, Status, decode, encode};
use donelight_firmware::clock::Clock;
use donelight_firmware::panel::PushButton;
use donelight_firmware::ring::LineFault;
use donelight_firmware::run::{GaugePort, Panel, Watchdog, run};
use embedded_hal::digital::{ErrorType, InputPin, OutputPin};
use embedded_io_async::{Read, Write};
use embedded_storage::nor_flash::{
    ErrorType as FlashErrorType, MultiwriteNorFlash, NorFlash, NorFlashErrorKind, ReadNorFlash,
};

/// A level that the test and the station share.
#[derive(Clone, Default)]
pub(crate) struct Wire(Rc<Cell<bool>>);

impl Wire {
    fn high() -> Self {
        Self(Rc::new(Cell::new(true)))
    }
    pub(crate) fn is_on(&self) -> bool {
        self.0.get()
    }
    pub(crate) fn set(&self, high: bool) {
        self.0.set(high);
    }
}

impl ErrorType for Wire {
    type Error = Infallible;
}

impl InputPin for Wire {
    fn is_high(&mut self) -> Result<bool, Infallible> {
        Ok(self.0.get())
    }
    fn is_low(&mut self) -> Result<bool, Infallible> {
        Ok(!self.0.get())
    }
}

impl OutputPin for Wire {
    fn set_low(&mut self) -> Result<(), Infallible> {
        self.0.set(false);
        Ok(())
    }
    fn set_high(&mut self) -> Result<(), Infallible> {
        self.0.set(true);
        Ok(())
    }
}

/// All that the test sees of the world around the loop.
#[derive(Default)]
struct World {
    now: Cell<u64>,
    from_gauge: RefCell<VecDeque<Result<u8, LineFault>>>,
    line: Cell<Option<LineSettings>>,
    to_station: RefCell<VecDeque<u8>>,
    from_station: RefCell<VecDeque<u8>>,
    /// The host takes what the station sends.
    fetching: Cell<bool>,
    /// The host sends rubbish without a pause: the state of its generator.
    flood: Cell<Option<u32>>,
    fed_at: Cell<u64>,
    longest_unfed: Cell<u64>,
}

#[derive(Clone, Copy)]
struct Shared(&'static World);

impl Clock for Shared {
    fn now(&self) -> Millis {
        Millis(self.0.now.get())
    }
    async fn pause(&self, milliseconds: u64) {
        let end = self.0.now.get() + milliseconds;
        poll_fn(|_| if self.0.now.get() >= end { Poll::Ready(()) } else { Poll::Pending }).await;
    }
}

impl Watchdog for Shared {
    fn feed(&mut self) {
        let unfed = self.0.now.get() - self.0.fed_at.replace(self.0.now.get());
        self.0.longest_unfed.set(self.0.longest_unfed.get().max(unfed));
    }
}

struct Gauge(&'static World);

impl embedded_io_async::ErrorType for Gauge {
    type Error = LineFault;
}

impl Read for Gauge {
    async fn read(&mut self, buffer: &mut [u8]) -> Result<usize, LineFault> {
        poll_fn(|_| {
            let mut waiting = self.0.from_gauge.borrow_mut();
            match waiting.pop_front() {
                None => Poll::Pending,
                Some(Err(fault)) => Poll::Ready(Err(fault)),
                Some(Ok(byte)) => {
                    buffer[0] = byte;
                    Poll::Ready(Ok(1))
                }
            }
        })
        .await
    }
}

impl GaugePort for Gauge {
    fn configure(&mut self, settings: LineSettings) {
        self.0.line.set(Some(settings));
    }
}

struct HostEnd(&'static World);

impl embedded_io_async::ErrorType for HostEnd {
    type Error = Infallible;
}

impl Read for HostEnd {
    async fn read(&mut self, buffer: &mut [u8]) -> Result<usize, Infallible> {
        poll_fn(|_| {
            if let Some(noise) = self.0.flood.get() {
                let mut noise = noise;
                for place in buffer.iter_mut() {
                    noise = noise.wrapping_mul(1_664_525).wrapping_add(1_013_904_223);
                    // Zeros end frames; with an even distribution they would be few.
                    *place = if noise >> 29 == 0 { 0 } else { (noise >> 16) as u8 };
                }
                self.0.flood.set(Some(noise));
                return Poll::Ready(Ok(buffer.len()));
            }
            let mut waiting = self.0.to_station.borrow_mut();
            let length = waiting.len().min(buffer.len());
            for (place, byte) in buffer.iter_mut().zip(waiting.drain(..length)) {
                *place = byte;
            }
            if length == 0 { Poll::Pending } else { Poll::Ready(Ok(length)) }
        })
        .await
    }
}

impl Write for HostEnd {
    async fn write(&mut self, bytes: &[u8]) -> Result<usize, Infallible> {
        poll_fn(|_| {
            if !self.0.fetching.get() {
                return Poll::Pending;
            }
            // A part at a time, as ports do.
            let part = &bytes[..bytes.len().min(10)];
            self.0.from_station.borrow_mut().extend(part);
            Poll::Ready(Ok(part.len()))
        })
        .await
    }
    async fn flush(&mut self) -> Result<(), Infallible> {
        Ok(())
    }
}

/// NOR flash of 64 sectors.
struct Flash(Vec<u8>);

impl FlashErrorType for Flash {
    type Error = NorFlashErrorKind;
}

impl ReadNorFlash for Flash {
    const READ_SIZE: usize = 1;
    fn read(&mut self, offset: u32, bytes: &mut [u8]) -> Result<(), NorFlashErrorKind> {
        bytes.copy_from_slice(&self.0[offset as usize..][..bytes.len()]);
        Ok(())
    }
    fn capacity(&self) -> usize {
        self.0.len()
    }
}

impl NorFlash for Flash {
    const WRITE_SIZE: usize = 1;
    const ERASE_SIZE: usize = 4096;
    fn erase(&mut self, from: u32, to: u32) -> Result<(), NorFlashErrorKind> {
        self.0[from as usize..to as usize].fill(0xff);
        Ok(())
    }
    fn write(&mut self, offset: u32, bytes: &[u8]) -> Result<(), NorFlashErrorKind> {
        for (cell, byte) in self.0[offset as usize..].iter_mut().zip(bytes) {
            *cell &= byte;
        }
        Ok(())
    }
}

impl MultiwriteNorFlash for Flash {}

/// A running loop with its pins.
pub(crate) struct Bench {
    world: &'static World,
    station: Pin<Box<dyn Future<Output = ()>>>,
    pub(crate) done: Wire,
    pub(crate) attention: Wire,
    pub(crate) taken: Wire,
    pub(crate) take_back: Wire,
    requests: u32,
}

impl Bench {
    /// A new station, 100 ms after its start.
    pub(crate) fn start() -> Self {
        // Leaked: the loop's futures borrow it for ever.
        let world: &'static World = Box::leak(Box::default());
        world.fetching.set(true);
        let firmware = Text::new("bench").unwrap();
        let flash = Flash(vec![0xff; 64 * 4096]);
        let recorder = Recorder::open(flash, StationId([7; 8]), firmware, Millis(0)).unwrap();
        let [done, attention, taken] = [(); 3].map(|()| Wire::default());
        let [take_back, seen] = [(); 2].map(|()| Wire::high());
        let panel = Panel {
            done: done.clone(),
            attention: attention.clone(),
            taken: taken.clone(),
            take_back: PushButton::new(take_back.clone()),
            seen: PushButton::new(seen),
        };
        let host = (HostEnd(world), HostEnd(world));
        let station = Box::pin(run(recorder, Gauge(world), host, panel, Shared(world), Shared(world)));
        let mut bench = Self { world, station, done, attention, taken, take_back, requests: 0 };
        bench.pass(100);
        bench
    }

    /// Lets time pass, millisecond by millisecond.
    pub(crate) fn pass(&mut self, milliseconds: u64) {
        for _ in 0..milliseconds {
            self.world.now.set(self.world.now.get() + 1);
            // Often enough for every byte that waits.
            for _ in 0..50 {
                let mut context = Context::from_waker(Waker::noop());
                assert!(self.station.as_mut().poll(&mut context).is_pending(), "the loop has ended");
            }
        }
    }

    /// The gauge sends a line; gives whether the *taken* lamp winked.
    pub(crate) fn measure(&mut self, line: &str) -> bool {
        self.world.from_gauge.borrow_mut().extend(line.bytes().chain(*b"\r\n").map(Ok));
        self.pass(20);
        let told = self.taken.is_on();
        self.pass(200);
        assert!(!self.taken.is_on());
        told
    }

    /// Bytes of the gauge are lost.
    pub(crate) fn fault(&mut self, fault: LineFault) {
        self.world.from_gauge.borrow_mut().push_back(Err(fault));
    }

    /// What the gauge's port was last set to.
    pub(crate) fn line(&self) -> Option<LineSettings> {
        self.world.line.get()
    }

    /// Whether the host takes what the station sends.
    pub(crate) fn fetch(&self, fetching: bool) {
        self.world.fetching.set(fetching);
    }

    /// Whether the host sends rubbish without a pause.
    pub(crate) fn flood(&self, on: bool) {
        self.world.flood.set(on.then_some(1));
    }

    /// The longest time without the watchdog's food, in milliseconds.
    pub(crate) fn longest_unfed(&self) -> u64 {
        self.world.longest_unfed.get()
    }

    /// The host asks.
    pub(crate) fn send(&mut self, request: &Request) {
        self.requests += 1;
        let mut frame = [0; FRAME_MAX];
        self.world.to_station.borrow_mut().extend(encode(self.requests, request, &mut frame).unwrap());
    }

    /// The answer to the last request, if it comes within two seconds.
    pub(crate) fn answer<R>(&mut self, read: impl Fn(Reply<'_>) -> R) -> Option<R> {
        let mut frames = FrameReader::default();
        for _ in 0..2_000 {
            self.pass(1);
            for byte in self.world.from_station.borrow_mut().drain(..) {
                let Some(frame) = frames.push(byte) else { continue };
                let (number, reply) = decode(frame).unwrap();
                if number == self.requests {
                    return Some(read(reply));
                }
            }
        }
        None
    }

    /// Loads a plan.
    pub(crate) fn load(&mut self, plan: Plan) {
        self.send(&Request::Load { plan, replace: false });
        let recorded = self.answer(|reply| matches!(reply, Reply::Recorded(_)));
        assert_eq!(recorded, Some(true));
        self.pass(100);
    }

    /// How the station stands.
    pub(crate) fn status(&mut self) -> Status {
        self.send(&Request::Status);
        self.answer(|reply| match reply {
            Reply::Status(status) => status,
            other => panic!("{other:?}"),
        })
        .expect("an answer")
    }
}
