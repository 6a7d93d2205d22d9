// `node program.mjs IMAGE.elf`: the bare core of the emulator runs a program that speaks by semihosting, with this process's
// standard input and output. Nothing of a board is there.

import { readFileSync, writeSync } from 'node:fs';

import { RP2040 } from 'rp2040js';

import { segments } from './elf.mjs';

const RAM = 0x20000000;
const CODE_WORDS = 64 * 1024; // 256 KiB from address 0, in the place of the boot ROM

// Arm's Semihosting for AArch32 and AArch64, version 2023Q3 (from memory).
const SEMIHOSTING = 0xab;
const [OPEN, CLOSE, WRITE, READ, EXIT, EXIT_EXTENDED] = [0x01, 0x02, 0x05, 0x06, 0x18, 0x20];
const [INPUT, OUTPUT, ERROR] = [1, 2, 3];

const mcu = new RP2040();
const { core } = mcu;
const code = Buffer.alloc(CODE_WORDS * 4);
for (const { physical, bytes } of segments(readFileSync(process.argv[2]))) bytes.copy(code, physical);
mcu.bootrom = new Uint32Array(code.buffer, code.byteOffset, CODE_WORDS);
core.VTOR = 0;
core.SP = mcu.readUint32(0);
core.PC = mcu.readUint32(4) & ~1;

const input = readFileSync(0);
let taken = 0;
let ended = null;

const serve = {
  // The mode tells which of the three it is: reading, writing or appending.
  [OPEN]: (argument) => [INPUT, OUTPUT, ERROR][argument(1) >> 2],
  [CLOSE]: () => 0,
  [WRITE](argument) {
    const at = argument(1);
    const bytes = Uint8Array.from({ length: argument(2) }, (_, i) => mcu.readUint8(at + i));
    writeSync(argument(0) === OUTPUT ? 1 : 2, bytes);
    return 0;
  },
  [READ](argument) {
    const ready = Math.min(argument(2), input.length - taken);
    mcu.sram.set(input.subarray(taken, taken + ready), argument(1) - RAM);
    taken += ready;
    return argument(2) - ready;
  },
  [EXIT]: (_, block) => ((ended = block), 0),
  [EXIT_EXTENDED]: (argument) => ((ended = argument(1)), 0),
};

mcu.onBreak = (number) => {
  const { registers } = core;
  const block = registers[1];
  const served = number === SEMIHOSTING && serve[registers[0]];
  if (!served) throw new Error(`breakpoint ${number} at 0x${core.PC.toString(16)}`);
  registers[0] = served((n) => mcu.readUint32(block + 4 * n), block);
};

while (ended === null) core.executeInstruction();
process.exit(ended === 0x20026 ? 0 : ended); // ADP_Stopped_ApplicationExit
