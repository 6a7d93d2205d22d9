// A stand-in for the RP2040's boot ROM and its flash controller.
//
// The ROM's functions are found through a look-up function at a fixed place (RP2040 data sheet, section 2.8.3). Here each
// entry is `bkpt #n; bx lr`, and the harness does the work when the core stops there.

const BKPT = 0xbe00;
const BX_LR = 0x4770;
const WFI = 0xbf30;
const BRANCH_BACK_ONE = 0xe7fd;
const FUNCTION_TABLE_POINTER = 0x14;
const DATA_TABLE_POINTER = 0x16;
const LOOK_UP_POINTER = 0x18;
const FIRST_ENTRY = 0x100;
const LOOK_UP = 1;

const SSI = 0x18000;
const SSI_ENABLE = 0x08;
const SSI_DATA = 0x60;

/** An address at which the core does nothing but serve interrupts, for ever. */
export const HANG_ADDRESS = 0x80;

/** Puts the ROM into `mcu` and serves its flash calls from `chip`. */
export function installBootRom(mcu, chip) {
  const calls = romCalls(mcu, chip);
  const codes = Object.keys(calls);
  const rom = new DataView(new ArrayBuffer(mcu.bootrom.byteLength));
  let next = FIRST_ENTRY;
  const entry = (n) => {
    rom.setUint16(next, BKPT | n, true);
    rom.setUint16(next + 2, BX_LR, true);
    next += 4;
    return (next - 4) | 1;
  };
  rom.setUint16(HANG_ADDRESS, WFI, true);
  rom.setUint16(HANG_ADDRESS + 2, BRANCH_BACK_ONE, true);
  // The two tables are never read: every look-up goes through the entry below.
  rom.setUint16(FUNCTION_TABLE_POINTER, 0x90, true);
  rom.setUint16(DATA_TABLE_POINTER, 0x90, true);
  rom.setUint16(LOOK_UP_POINTER, entry(LOOK_UP), true);
  const entries = new Map(codes.map((code, i) => [code.charCodeAt(0) | (code.charCodeAt(1) << 8), entry(i + 2)]));
  mcu.bootrom.set(new Uint32Array(rom.buffer));

  mcu.onBreak = (n) => {
    const { registers } = mcu.core;
    if (n === LOOK_UP) {
      const found = entries.get(registers[1]);
      if (!found) throw new Error(`the stand-in ROM has no function 0x${registers[1].toString(16)}`);
      registers[0] = found;
    } else if (codes[n - 2]) {
      calls[codes[n - 2]](registers);
    } else {
      throw new Error(`the image stopped at bkpt #${n}, PC 0x${mcu.core.PC.toString(16)}`);
    }
  };
}

/** The ROM's functions by their two-letter codes (RP2040 data sheet, section 2.8.3.1). */
function romCalls(mcu, chip) {
  const copy = (r) => {
    for (let i = 0; i < r[2]; i++) mcu.writeUint8(r[0] + i, mcu.readUint8(r[1] + i));
  };
  return {
    IF: () => {},
    EX: () => {},
    FC: () => {},
    CX: () => {},
    RE: (r) => chip.erase(r[0], r[1]),
    RP: (r) => chip.program(r[0], Uint8Array.from({ length: r[2] }, (_, i) => mcu.readUint8(r[1] + i))),
    C4: copy,
    MC: copy,
  };
}

/** Gives `mcu` a flash controller that passes instructions to `chip`. */
export function installFlashController(mcu, chip) {
  const ssi = mcu.peripherals[SSI];
  const read = ssi.readUint32.bind(ssi);
  const write = ssi.writeUint32.bind(ssi);
  let waiting = [];
  ssi.writeUint32 = (offset, value) => {
    if (offset === SSI_ENABLE) waiting = [];
    if (offset === SSI_DATA) waiting.push(...(chip.answer(value & 0xff) ?? []));
    write(offset, value);
  };
  ssi.readUint32 = (offset) => (offset === SSI_DATA && waiting.length ? waiting.shift() : read(offset));
}
