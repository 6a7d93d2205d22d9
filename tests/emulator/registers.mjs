// Registers of the RP2040 that the emulator does not have and an image only sets up or looks at.

import { BasePeripheral } from 'rp2040js';

const PARTS = { XIP_CTRL: 0x14000, ROSC: 0x40060, VREG_AND_CHIP_RESET: 0x40064 };

const DMA_CHANNEL_ABORT = 0x444;

/** Registers that keep what is written, and read 0 before. */
class PlainRegisters extends BasePeripheral {
  values = new Map();
  readUint32(offset) {
    return this.values.get(offset) ?? 0;
  }
  writeUint32(offset, value) {
    this.values.set(offset, value);
  }
}

/** Puts what is missing into `mcu`. */
export function installMissingRegisters(mcu) {
  const { dma } = mcu;
  const read = dma.readUint32.bind(dma);
  // A transfer is aborted at once, so no bit is ever seen set.
  dma.readUint32 = (offset) => (offset === DMA_CHANNEL_ABORT ? 0 : read(offset));
  for (const [name, place] of Object.entries(PARTS)) mcu.peripherals[place] = new PlainRegisters(mcu, name);
}
