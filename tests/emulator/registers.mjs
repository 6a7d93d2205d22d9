// Parts of the RP2040 that the emulator does not have and an image only sets up or looks at: registers that keep what is
// written, and read 0 before.

import { BasePeripheral } from 'rp2040js';

const PARTS = { XIP_CTRL: 0x14000, ROSC: 0x40060, VREG_AND_CHIP_RESET: 0x40064 };

class PlainRegisters extends BasePeripheral {
  values = new Map();
  readUint32(offset) {
    return this.values.get(offset) ?? 0;
  }
  writeUint32(offset, value) {
    this.values.set(offset, value);
  }
}

/** Puts the missing parts into `mcu`. */
export function installMissingRegisters(mcu) {
  for (const [name, place] of Object.entries(PARTS)) mcu.peripherals[place] = new PlainRegisters(mcu, name);
}
