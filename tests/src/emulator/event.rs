//! What the emulated board reports.

use serde::Deserialize;

/// Something that happened on the board or around it.
#[derive(Clone, Debug, PartialEq, Deserialize)]
pub struct Event {
    /// Simulated time since the board was made, in nanoseconds, over all power cycles.
    pub at: u64,
    /// Cycles in which the core was not asleep, over all power cycles.
    pub cycles: u64,
    /// What.
    #[serde(flatten)]
    pub what: What,
}

/// See [`Event`].
#[derive(Clone, Debug, PartialEq, Deserialize)]
#[serde(tag = "kind", rename_all = "kebab-case")]
pub enum What {
    /// An output pin changed.
    Pin {
        /// GPIO number.
        pin: u8,
        /// Its level now.
        high: bool,
    },
    /// A flash operation begins.
    Flash {
        /// Which.
        operation: Operation,
        /// Where in the chip.
        address: u32,
        /// How many bytes.
        length: u32,
    },
    /// A flash operation is complete.
    FlashDone {
        /// Which.
        operation: Operation,
        /// Where in the chip.
        address: u32,
    },
    /// The gauge's line feed has arrived.
    LineEnd,
    /// The gauge has nothing more to send.
    GaugeQuiet,
    /// A byte of the gauge found the UART full.
    Overrun,
    /// Bytes for the host's program.
    Usb {
        /// In hexadecimal.
        hex: String,
    },
    /// The host has found the board and opened its serial port.
    Connected(UsbIdentity),
    /// The board does not know a request of the host.
    UsbRequestStalled,
    /// Bytes of the log.
    Log {
        /// In hexadecimal.
        hex: String,
    },
    /// The planned power cut.
    PowerLost,
    /// The board started anew by itself.
    Reset {
        /// `watchdog` or `system`.
        cause: String,
    },
    /// The image did something that the emulator does not know.
    EmulatorWarning {
        /// What it says.
        message: String,
    },
}

/// A flash operation.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Deserialize)]
#[serde(rename_all = "kebab-case")]
pub enum Operation {
    /// One or more sectors.
    Erase,
    /// One or more pages.
    Program,
}

/// How the board shows itself to a host.
#[derive(Clone, Debug, PartialEq, Eq, Deserialize)]
pub struct UsbIdentity {
    /// Vendor number.
    pub vendor: u16,
    /// Product number.
    pub product_id: u16,
    /// Manufacturer's name.
    pub manufacturer: String,
    /// Product's name.
    pub product: String,
    /// Serial number.
    pub serial_number: String,
}
