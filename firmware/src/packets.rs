//! A stream of bytes over packets of a fixed largest size, as USB has them.
//!
//! The far end takes bytes as complete only when a packet is shorter than the largest one, so a message that fills its
//! last packet needs an empty one behind it (USB 2.0 specification, section 5.8.3).

use embedded_io_async::{Error, ErrorType, Read, Write};

/// The largest packet of a full-speed bulk endpoint, in bytes.
pub const PACKET_SIZE: usize = 64;

/// Where packets come from.
pub trait PacketSource {
    /// Why none comes.
    type Error: Error;

    /// Waits for a packet, possibly empty, and gives its length.
    async fn receive(&mut self, packet: &mut [u8; PACKET_SIZE]) -> Result<usize, Self::Error>;
}

/// Where packets go.
pub trait PacketSink {
    /// Why one does not go.
    type Error: Error;

    /// Waits until the packet of at most [`PACKET_SIZE`] bytes is on its way.
    async fn send(&mut self, packet: &[u8]) -> Result<(), Self::Error>;
}

/// Bytes out of packets.
pub struct PacketReader<S> {
    source: S,
    packet: [u8; PACKET_SIZE],
    taken: usize,
    length: usize,
}

impl<S> PacketReader<S> {
    /// Reads from `source`.
    pub const fn new(source: S) -> Self {
        Self { source, packet: [0; PACKET_SIZE], taken: 0, length: 0 }
    }
}

impl<S: PacketSource> ErrorType for PacketReader<S> {
    type Error = S::Error;
}

impl<S: PacketSource> Read for PacketReader<S> {
    async fn read(&mut self, buffer: &mut [u8]) -> Result<usize, S::Error> {
        if buffer.is_empty() {
            return Ok(0);
        }
        while self.taken == self.length {
            self.taken = 0;
            self.length = 0;
            self.length = self.source.receive(&mut self.packet).await?.min(PACKET_SIZE);
        }
        let waiting = self.packet.get(self.taken..self.length).unwrap_or_default();
        let count = waiting.len().min(buffer.len());
        buffer.iter_mut().zip(waiting).for_each(|(place, byte)| *place = *byte);
        self.taken += count;
        Ok(count)
    }
}

/// Bytes into packets. `flush` ends a message.
pub struct PacketWriter<S> {
    sink: S,
    /// The last packet was a full one: the far end still waits.
    open: bool,
}

impl<S> PacketWriter<S> {
    /// Writes to `sink`.
    pub const fn new(sink: S) -> Self {
        Self { sink, open: false }
    }
}

impl<S: PacketSink> ErrorType for PacketWriter<S> {
    type Error = S::Error;
}

impl<S: PacketSink> Write for PacketWriter<S> {
    async fn write(&mut self, bytes: &[u8]) -> Result<usize, S::Error> {
        let packet = &bytes[..bytes.len().min(PACKET_SIZE)];
        if packet.is_empty() {
            return Ok(0);
        }
        self.sink.send(packet).await?;
        self.open = packet.len() == PACKET_SIZE;
        Ok(packet.len())
    }

    async fn flush(&mut self) -> Result<(), S::Error> {
        if self.open {
            self.sink.send(&[]).await?;
            self.open = false;
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    extern crate std;
    use std::{collections::VecDeque, vec, vec::Vec};

    use core::convert::Infallible;

    use embassy_futures::block_on;

    use super::*;

    #[derive(Default)]
    struct Packets(VecDeque<Vec<u8>>);

    impl PacketSink for Packets {
        type Error = Infallible;
        async fn send(&mut self, packet: &[u8]) -> Result<(), Infallible> {
            assert!(packet.len() <= PACKET_SIZE);
            self.0.push_back(packet.to_vec());
            Ok(())
        }
    }

    impl PacketSource for Packets {
        type Error = Infallible;
        async fn receive(&mut self, packet: &mut [u8; PACKET_SIZE]) -> Result<usize, Infallible> {
            let next = self.0.pop_front().expect("a packet");
            packet[..next.len()].copy_from_slice(&next);
            Ok(next.len())
        }
    }

    fn sent(length: usize) -> Vec<usize> {
        let mut writer = PacketWriter::new(Packets::default());
        block_on(writer.write_all(&vec![7; length])).unwrap();
        block_on(writer.flush()).unwrap();
        block_on(writer.flush()).unwrap();
        writer.sink.0.iter().map(Vec::len).collect()
    }

    #[test]
    fn a_message_always_ends_with_a_packet_that_is_not_full() {
        assert_eq!(sent(0), [0; 0]);
        assert_eq!(sent(1), [1]);
        assert_eq!(sent(63), [63]);
        assert_eq!(sent(64), [64, 0]);
        assert_eq!(sent(65), [64, 1]);
        assert_eq!(sent(128), [64, 64, 0]);
    }

    #[test]
    fn bytes_come_out_of_packets_in_order_whatever_the_buffers_size() {
        for size in [1, 3, 64, 200] {
            let packets = [vec![1; 64], vec![], vec![2, 3], vec![4]];
            let expected: Vec<u8> = packets.concat();
            let mut reader = PacketReader::new(Packets(packets.into()));
            let mut all = Vec::new();
            let mut buffer = vec![0; size];
            while all.len() < expected.len() {
                let count = block_on(reader.read(&mut buffer)).unwrap();
                assert!(count > 0);
                all.extend_from_slice(&buffer[..count]);
            }
            assert_eq!(all, expected);
        }
    }
}
