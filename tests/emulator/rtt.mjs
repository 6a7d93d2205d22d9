// The log that `defmt-rtt` keeps in a ring in RAM: copies out what is new.

const RAM = 0x20000000;
const BUFFER = 28; // places in the control block: up-channel 0
const SIZE = 32;
const WRITE = 36;
const READ = 40;

/** Takes the bytes written since the last call out of the ring whose control block stands at `address`. */
export function takeLog(mcu, address) {
  const block = address - RAM;
  const field = (offset) => mcu.sramView.getUint32(block + offset, true);
  const [buffer, size, write, read] = [BUFFER, SIZE, WRITE, READ].map(field);
  const valid = buffer >= RAM && buffer - RAM + size <= mcu.sram.length && write < size && read < size;
  if (!valid || write === read) return null;
  const start = buffer - RAM;
  const part = (from, to) => mcu.sram.subarray(start + from, start + to);
  const log = read < write ? part(read, write) : Buffer.concat([part(read, size), part(0, write)]);
  mcu.sramView.setUint32(block + READ, write, true);
  return Buffer.from(log);
}
