//! The station's log, as `defmt` sends it.

use defmt_decoder::{DecodeError, Table};

/// The lines in these bytes of one power cycle, oldest first, each with its level.
///
/// # Panics
/// If the image has no log table, or the bytes do not fit it.
#[must_use]
pub fn lines(image: &[u8], bytes: &[u8]) -> Vec<String> {
    let table = Table::parse(image).expect("a readable log table").expect("an image that logs");
    let mut decoder = table.new_stream_decoder();
    decoder.received(bytes);
    let mut lines = Vec::new();
    loop {
        match decoder.decode() {
            Ok(frame) => {
                let level = frame.level().map_or("", |level| level.as_str());
                lines.push(format!("{level} {}", frame.display_message()));
            }
            Err(DecodeError::UnexpectedEof) => return lines,
            Err(DecodeError::Malformed) => panic!("a log that does not belong to this image: {bytes:02x?}"),
        }
    }
}
