//! Which stations are attached: the ports whose USB product string is the station's own. Vendor and product numbers say
//! nothing, since they are not ours; port names change whenever a station is plugged in again.

use serialport::{SerialPortInfo, SerialPortType};

use super::PortError;

/// The station's USB manufacturer string.
pub const MANUFACTURER: &str = "Donelight";

/// The station's USB product string.
pub const PRODUCT: &str = "Donelight station";

/// A station at a port.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Attached {
    /// The port's name, for `--port`.
    pub port: String,
    /// Its USB serial number: the station's number.
    pub serial: Option<String>,
}

/// All stations attached, by port name.
///
/// # Errors
/// [`PortError::NotListed`].
pub fn attached() -> Result<Vec<Attached>, PortError> {
    match serialport::available_ports() {
        Ok(ports) => Ok(stations_among(ports)),
        Err(error) => Err(PortError::NotListed { reason: error.to_string() }),
    }
}

/// The port that is named, or that of the one station attached.
///
/// # Errors
/// [`PortError::NoStation`], [`PortError::Several`], [`PortError::NotListed`].
pub fn choose(named: Option<&str>) -> Result<String, PortError> {
    match named {
        Some(port) => Ok(port.to_owned()),
        None => only(attached()?),
    }
}

fn only(mut stations: Vec<Attached>) -> Result<String, PortError> {
    match (stations.pop(), stations.is_empty()) {
        (None, _) => Err(PortError::NoStation),
        (Some(one), true) => Ok(one.port),
        (Some(last), false) => {
            let ports = stations.into_iter().chain([last]).map(|station| station.port).collect();
            Err(PortError::Several { ports })
        }
    }
}

fn stations_among(ports: Vec<SerialPortInfo>) -> Vec<Attached> {
    let mut stations: Vec<Attached> = ports.into_iter().filter_map(station).collect();
    stations.sort_by(|a, b| a.port.cmp(&b.port));
    // macOS lists a port once for calling in and once for calling out; the latter does not wait for a carrier.
    let outward: Vec<String> =
        stations.iter().filter_map(|s| s.port.strip_prefix("/dev/cu.").map(str::to_owned)).collect();
    stations
        .retain(|s| s.port.strip_prefix("/dev/tty.").is_none_or(|name| !outward.iter().any(|o| o == name)));
    stations
}

fn station(port: SerialPortInfo) -> Option<Attached> {
    let SerialPortType::UsbPort(usb) = port.port_type else { return None };
    let ours = usb.product.as_deref() == Some(PRODUCT) && usb.manufacturer.as_deref() == Some(MANUFACTURER);
    ours.then_some(Attached { port: port.port_name, serial: usb.serial_number })
}

#[cfg(test)]
mod tests {
    use serialport::UsbPortInfo;

    use super::*;

    fn port(name: &str, manufacturer: Option<&str>, product: Option<&str>) -> SerialPortInfo {
        SerialPortInfo {
            port_name: name.to_owned(),
            port_type: SerialPortType::UsbPort(UsbPortInfo {
                vid: 0x1209,
                pid: 1,
                serial_number: Some("e660443043".to_owned()),
                manufacturer: manufacturer.map(str::to_owned),
                product: product.map(str::to_owned),
            }),
        }
    }

    fn ports_of(stations: &[Attached]) -> Vec<&str> {
        stations.iter().map(|station| station.port.as_str()).collect()
    }

    #[test]
    fn a_station_is_known_by_its_product_and_manufacturer_strings_only() {
        let found = stations_among(vec![
            port("/dev/ttyACM2", Some(MANUFACTURER), Some(PRODUCT)),
            port("/dev/ttyACM1", Some("Another"), Some(PRODUCT)),
            port("/dev/ttyACM0", Some(MANUFACTURER), Some("Donelight probe")),
            port("/dev/ttyUSB0", None, None),
            SerialPortInfo { port_name: "/dev/ttyS0".to_owned(), port_type: SerialPortType::Unknown },
        ]);
        assert_eq!(ports_of(&found), ["/dev/ttyACM2"]);
        assert_eq!(found[0].serial.as_deref(), Some("e660443043"));
    }

    #[test]
    fn without_a_name_it_must_be_the_only_one() {
        let one = || stations_among(vec![port("/dev/ttyACM0", Some(MANUFACTURER), Some(PRODUCT))]);
        assert_eq!(only(one()).unwrap(), "/dev/ttyACM0");
        assert!(matches!(only(Vec::new()), Err(PortError::NoStation)));
        let mut two = one();
        two.extend(stations_among(vec![port("/dev/ttyACM7", Some(MANUFACTURER), Some(PRODUCT))]));
        let error = only(two).unwrap_err();
        assert_eq!(error.to_string(), "2 stations are attached: /dev/ttyACM0, /dev/ttyACM7");
    }

    #[test]
    fn a_station_on_macos_counts_once() {
        let found = stations_among(vec![
            port("/dev/tty.usbmodem101", Some(MANUFACTURER), Some(PRODUCT)),
            port("/dev/cu.usbmodem101", Some(MANUFACTURER), Some(PRODUCT)),
        ]);
        assert_eq!(ports_of(&found), ["/dev/cu.usbmodem101"]);
    }
}
