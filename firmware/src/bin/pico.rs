//! The Raspberry Pi Pico as a Donelight station: wiring only. The pin map stands in the README.
//!
//! | GPIO | what |
//! |---|---|
//! | 0, 1 | UART0 to and from the gauge |
//! | 14 | button "take back", to ground |
//! | 15 | button "seen", to ground |
//! | 16 | done lamp, green |
//! | 17 | attention lamp, yellow |
//! | 25 | taken lamp: the light on the board |
#![no_std]
#![no_main]

use core::{cell::UnsafeCell, fmt::Write as _};

use cortex_m_rt::{ExceptionFrame, exception};
use defmt_rtt as _;
use donelight_core::{
    journal::OpenError,
    plan::{LineSettings, Parity},
    record::Millis,
    recorder::Recorder,
    text::Text,
    wire::StationId,
};
use donelight_firmware::{
    clock::Clock,
    packets::{PACKET_SIZE, PacketReader, PacketSink, PacketSource, PacketWriter},
    panel::PushButton,
    region::Region,
    ring::{LineFault, RING_SIZE, RingReader, RingSource},
    run::{self, GaugePort, Panel},
};
use embassy_executor::Spawner;
use embassy_rp::{
    Peri, bind_interrupts,
    flash::{Blocking, Flash},
    gpio::{Input, Level, Output, Pull},
    pac,
    peripherals::{DMA_CH0, FLASH, PIN_0, PIN_1, UART0, USB},
    uart::{self, Uart},
    usb,
    watchdog::Watchdog,
};
use embassy_time::{Duration, Instant, Timer};
use embassy_usb::{
    UsbDevice,
    class::cdc_acm::{CdcAcmClass, Receiver, Sender, State},
    driver::EndpointError,
};
// thumbv6m has no compare-and-swap; this crate stands in for it, by embassy-rp's critical section.
use portable_atomic as _;
use static_cell::StaticCell;

/// The board's flash chip in bytes.
const FLASH_SIZE: usize = 2 * 1024 * 1024;
/// Where the journal begins and ends in the flash. memory.x keeps the image below it.
const JOURNAL_START: u32 = 0x10_0000;
const JOURNAL_END: u32 = 0x20_0000;

/// The station restarts when it has not come round for this long: near the most that the chip can count, and many times
/// the longest erase.
const WATCHDOG: Duration = Duration::from_secs(8);

/// pid.codes' pair for tests (from memory). A product that is sold needs its own; the host knows a station by the name
/// below, not by this pair.
const USB_VENDOR: u16 = 0x1209;
const USB_PRODUCT: u16 = 0x0001;

bind_interrupts!(struct Irqs {
    USBCTRL_IRQ => usb::InterruptHandler<USB>;
});

type UsbDriver = usb::Driver<'static, USB>;
type Chip = Flash<'static, FLASH, Blocking, FLASH_SIZE>;

#[embassy_executor::main]
async fn main(spawner: Spawner) {
    let board = embassy_rp::init(Default::default());
    let mut chip = Chip::new_blocking(board.FLASH);
    let mut id = StationId([0; 8]);
    if let Err(error) = chip.blocking_unique_id(&mut id.0) {
        defmt::error!("no unique id: {}", error);
    }
    defmt::info!("Donelight {=str}, station {=[u8; 8]:02x}", env!("CARGO_PKG_VERSION"), id.0);

    let panel = Panel {
        done: Output::new(board.PIN_16, Level::Low),
        attention: Output::new(board.PIN_17, Level::Low),
        taken: Output::new(board.PIN_25, Level::Low),
        take_back: PushButton::new(Input::new(board.PIN_14, Pull::Up)),
        seen: PushButton::new(Input::new(board.PIN_15, Pull::Up)),
    };
    let wires = GaugeWires::connect(board.UART0, board.PIN_0, board.PIN_1, board.DMA_CH0);
    let gauge = Gauge(RingReader::new(wires, BoardClock));

    let journal = Region::<Chip, JOURNAL_START, JOURNAL_END>::new(chip);
    let recorder = Recorder::open(journal, id, firmware_name(), BoardClock.now());
    // Only now, since replaying a full journal takes seconds: a host gives up a port that does not answer, and the
    // watchdog allows no more than 8 s.
    let mut watchdog = Watchdog::new(board.WATCHDOG);
    watchdog.start(WATCHDOG);
    let host = connect_usb(spawner, usb::Driver::new(board.USB, Irqs), id);
    match recorder {
        Ok(recorder) => run::run(recorder, gauge, host, panel, BoardClock, Feeder(watchdog)).await,
        Err(error) => {
            match error {
                OpenError::Format { found } => defmt::error!(
                    "the journal has format {=u8}: pull it with the image that wrote it, then erase the flash",
                    found
                ),
                _ => defmt::error!("the journal cannot be read: exchange the board"),
            }
            run::show_failure(panel, BoardClock, Feeder(watchdog)).await;
        }
    }
}

/// Name and version, as the host shows them.
fn firmware_name() -> Text<32> {
    Text::new(concat!("donelight-pico ", env!("CARGO_PKG_VERSION"))).unwrap_or_default()
}

/// Time since the start, by the chip's timer.
#[derive(Clone, Copy)]
struct BoardClock;

impl Clock for BoardClock {
    fn now(&self) -> Millis {
        Millis(Instant::now().as_millis())
    }

    async fn pause(&self, milliseconds: u64) {
        Timer::after_millis(milliseconds).await;
    }
}

struct Feeder(Watchdog);

impl run::Watchdog for Feeder {
    fn feed(&mut self) {
        self.0.feed(WATCHDOG);
    }
}

// The gauge's line.

/// The ring itself. It stands at a multiple of its size, since DMA wraps by masking the address.
#[repr(align(8192))]
struct Ring(UnsafeCell<[u8; RING_SIZE]>);

// SAFETY: the processor reads it only through `GaugeWires::copy`, by volatile reads of bytes; there is one `GaugeWires`.
unsafe impl Sync for Ring {}

static RING: Ring = Ring(UnsafeCell::new([0; RING_SIZE]));
const _: () = assert!(align_of::<Ring>() == RING_SIZE);

/// Bytes that a transfer is started for; it is started anew when half of them are through, two days at 115 200 baud.
const TRANSFER: u32 = u32::MAX;

/// UART0, and DMA channel 0 that empties it into [`RING`].
struct GaugeWires {
    uart: Peri<'static, UART0>,
    transmit: Peri<'static, PIN_0>,
    receive: Peri<'static, PIN_1>,
    _channel: Peri<'static, DMA_CH0>,
}

impl GaugeWires {
    fn connect(
        uart: Peri<'static, UART0>,
        transmit: Peri<'static, PIN_0>,
        receive: Peri<'static, PIN_1>,
        channel: Peri<'static, DMA_CH0>,
    ) -> Self {
        let mut wires = Self { uart, transmit, receive, _channel: channel };
        wires.set_line(LineSettings::default());
        Self::channel().write_addr().write_value(RING.0.get() as u32);
        Self::start_transfer();
        wires
    }

    fn channel() -> pac::dma::Channel {
        pac::DMA.ch(0)
    }

    /// Starts the channel where it stands.
    fn start_transfer() {
        let channel = Self::channel();
        channel.read_addr().write_value(pac::UART0.uartdr().as_ptr() as u32);
        channel.trans_count().write_value(TRANSFER);
        channel.ctrl_trig().write(|w| {
            w.set_treq_sel(pac::dma::vals::TreqSel::UART0_RX);
            w.set_data_size(pac::dma::vals::DataSize::SIZE_BYTE);
            w.set_incr_write(true);
            w.set_ring_sel(true);
            w.set_ring_size(RING_SIZE.trailing_zeros() as u8);
            w.set_chain_to(0);
            w.set_irq_quiet(true);
            w.set_en(true);
        });
    }

    fn set_line(&mut self, settings: LineSettings) {
        let mut config = uart::Config::default();
        config.baudrate = settings.baud;
        config.data_bits =
            if settings.data_bits == 7 { uart::DataBits::DataBits7 } else { uart::DataBits::DataBits8 };
        config.parity = match settings.parity {
            Parity::None => uart::Parity::ParityNone,
            Parity::Even => uart::Parity::ParityEven,
            Parity::Odd => uart::Parity::ParityOdd,
        };
        config.stop_bits =
            if settings.stop_bits == 2 { uart::StopBits::STOP2 } else { uart::StopBits::STOP1 };
        // The format register may be written only while the UART is off.
        pac::UART0.uartcr().write(|w| w.set_uarten(false));
        Uart::new_blocking(self.uart.reborrow(), self.transmit.reborrow(), self.receive.reborrow(), config);
        // The driver takes the pull away; an open line must rest, not pick up noise.
        pac::PADS_BANK0.gpio(1).modify(|w| w.set_pue(true));
        pac::UART0.uartdmacr().write(|w| w.set_rxdmae(true));
    }
}

impl RingSource for GaugeWires {
    fn carried(&self) -> u32 {
        TRANSFER - Self::channel().trans_count().read()
    }

    fn write_offset(&self) -> usize {
        Self::channel().write_addr().read() as usize % RING_SIZE
    }

    fn copy(&self, offset: usize, into: &mut [u8]) {
        assert!(offset + into.len() <= RING_SIZE);
        let start = RING.0.get().cast::<u8>();
        for (index, byte) in into.iter_mut().enumerate() {
            // SAFETY: within the ring by the line above. DMA writes whole bytes, so whatever it does meanwhile, a
            // volatile read gives the old or the new one; `RingReader` asks only for bytes that are written.
            *byte = unsafe { start.add(offset + index).read_volatile() };
        }
    }

    fn fault(&mut self) -> Option<LineFault> {
        let raised = pac::UART0.uartris().read();
        pac::UART0.uarticr().write(|w| {
            w.set_oeic(raised.oeris());
            w.set_beic(raised.beris());
            w.set_peic(raised.peris());
            w.set_feic(raised.feris());
        });
        if raised.oeris() {
            Some(LineFault::Overrun)
        } else {
            (raised.beris() || raised.peris() || raised.feris()).then_some(LineFault::Garbled)
        }
    }

    fn restart_if_due(&mut self) -> Option<u32> {
        let channel = Self::channel();
        if channel.ctrl_trig().read().busy() && self.carried() < TRANSFER / 2 {
            return None;
        }
        // The UART's buffer holds what comes meanwhile. A transfer under way is completed before the bit falls.
        pac::DMA.chan_abort().write(|w| w.set_chan_abort(1));
        while pac::DMA.chan_abort().read().chan_abort() & 1 != 0 {}
        while channel.ctrl_trig().read().busy() {}
        let carried = self.carried();
        Self::start_transfer();
        Some(carried)
    }
}

/// The gauge's line as the station's loop wants it.
struct Gauge(RingReader<GaugeWires, BoardClock>);

impl embedded_io_async::ErrorType for Gauge {
    type Error = LineFault;
}

impl embedded_io_async::Read for Gauge {
    async fn read(&mut self, buffer: &mut [u8]) -> Result<usize, LineFault> {
        self.0.read(buffer).await
    }
}

impl GaugePort for Gauge {
    fn configure(&mut self, settings: LineSettings) {
        self.0.source().set_line(settings);
    }
}

// The link to the host.

struct FromUsb(Receiver<'static, UsbDriver>);
struct ToUsb(Sender<'static, UsbDriver>);

impl PacketSource for FromUsb {
    type Error = EndpointError;
    async fn receive(&mut self, packet: &mut [u8; PACKET_SIZE]) -> Result<usize, EndpointError> {
        self.0.read_packet(packet).await
    }
}

impl PacketSink for ToUsb {
    type Error = EndpointError;
    async fn send(&mut self, packet: &[u8]) -> Result<(), EndpointError> {
        self.0.write_packet(packet).await
    }
}

/// Makes the board a serial port that shows its name and its number.
fn connect_usb(
    spawner: Spawner,
    driver: UsbDriver,
    id: StationId,
) -> (PacketReader<FromUsb>, PacketWriter<ToUsb>) {
    static SERIAL: StaticCell<heapless::String<16>> = StaticCell::new();
    static CONFIG: StaticCell<[u8; 128]> = StaticCell::new();
    static CONTROL: StaticCell<[u8; 64]> = StaticCell::new();
    static STATE: StaticCell<State> = StaticCell::new();

    let serial = SERIAL.init(heapless::String::new());
    if write!(serial, "{id}").is_err() {
        defmt::error!("a number of eight bytes has sixteen digits");
    }
    let mut config = embassy_usb::Config::new(USB_VENDOR, USB_PRODUCT);
    config.manufacturer = Some("Donelight");
    config.product = Some("Donelight station");
    config.serial_number = Some(serial);
    let config_descriptor = CONFIG.init([0; 128]);
    let control = CONTROL.init([0; 64]);
    let mut builder = embassy_usb::Builder::new(driver, config, config_descriptor, &mut [], &mut [], control);
    let port = CdcAcmClass::new(&mut builder, STATE.init(State::new()), PACKET_SIZE as u16);
    match usb_task(builder.build()) {
        Ok(task) => spawner.spawn(task),
        Err(_) => defmt::error!("no room for the USB task"),
    }
    let (sender, receiver) = port.split();
    (PacketReader::new(FromUsb(receiver)), PacketWriter::new(ToUsb(sender)))
}

#[embassy_executor::task]
async fn usb_task(mut device: UsbDevice<'static, UsbDriver>) -> ! {
    device.run().await
}

// When nothing helps: say where, and start anew. The journal holds all that was acknowledged.

#[panic_handler]
fn panic(info: &core::panic::PanicInfo) -> ! {
    cortex_m::interrupt::disable();
    match info.location() {
        Some(place) => defmt::error!("panic at {=str}:{=u32}", place.file(), place.line()),
        None => defmt::error!("panic"),
    }
    cortex_m::peripheral::SCB::sys_reset()
}

#[exception]
unsafe fn HardFault(frame: &ExceptionFrame) -> ! {
    defmt::error!("hard fault at {=u32:#x}", frame.pc());
    cortex_m::peripheral::SCB::sys_reset()
}
