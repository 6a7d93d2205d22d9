// `node board.mjs IMAGE.elf`: a Pico that runs under command. One JSON object a line in, one a line out.
//
// Nothing happens between commands, so a test that gives the same commands sees the same events. Every event carries
// the simulated time `at` in nanoseconds and `cycles`, the core's count of cycles in which it was not asleep, both over
// all power cycles. The commands are the methods of `Board` below.

import { readFileSync } from 'node:fs';
import { createInterface } from 'node:readline';

import { FLASH_SIZE, FlashChip } from './flash_chip.mjs';
import { Machine } from './machine.mjs';

const RAM = 0x20000000;

/** An image in a circle of unknown accesses would otherwise fill the memory. */
const EVENTS_MAX = 1_000_000;

const fromHex = (hex) => Uint8Array.from(Buffer.from(hex, 'hex'));

class Board {
  constructor(elf) {
    this.elf = elf;
    this.events = [];
    this.waitingFor = new Set();
    this.seen = false;
    this.machine = null;
    this.before = { nanos: 0, cycles: 0 };
    const report = (event) => this.report(event);
    this.chip = new FlashChip({
      contents: new Uint8Array(FLASH_SIZE).fill(0xff),
      uniqueId: new Uint8Array(8),
      report,
      stall: (nanos) => this.machine.stall(nanos),
      powerLost: () => this.machine.end('power-lost', 'planned cut'),
    });
  }

  get now() {
    return this.before.nanos + (this.machine?.clock.nanos ?? 0);
  }

  get cycles() {
    return this.before.cycles + (this.machine?.mcu.core.cycles ?? 0);
  }

  report(event) {
    if (this.events.length === EVENTS_MAX) throw new Error(`too many events; the last: ${JSON.stringify(event)}`);
    this.events.push({ ...event, at: Math.round(this.now), cycles: this.cycles });
    if (this.waitingFor.has(event.kind)) this.seen = true;
  }

  start(ram) {
    this.machine = new Machine({ elf: this.elf, chip: this.chip, report: (event) => this.report(event), ram });
  }

  stop() {
    this.before = { nanos: this.now, cycles: this.cycles };
    this.machine = null;
  }

  running() {
    if (!this.machine) throw new Error('the board has no power');
    return this.machine;
  }

  // The commands.

  /** Gives the board power; its flash is as it was left. */
  powerOn({ unique_id }) {
    if (this.machine) throw new Error('the board has power already');
    if (unique_id) this.chip.uniqueId = fromHex(unique_id);
    this.start();
  }

  /** Takes the power away between two instructions. */
  powerOff() {
    this.running().takeLog();
    this.stop();
  }

  /** Runs for `nanos` at most, and no further than the first event of a kind in `until`. */
  run({ nanos, until = [] }) {
    this.waitingFor = new Set(until);
    this.seen = false;
    const end = this.now + nanos;
    while (this.now < end && !this.seen) {
      this.running().run(end - this.now, () => this.seen);
      if (this.machine.over === 'power-lost') {
        this.stop();
        break;
      }
      if (this.machine.over === 'reset') {
        const ram = this.machine.mcu.sram;
        this.stop();
        this.start(ram);
      }
    }
    if (this.machine) this.machine.takeLog();
  }

  /** Bytes from the gauge, at the pace of its line. */
  gauge({ hex, line }) {
    this.running().gauge.send(fromHex(hex), line);
  }

  /** Bytes from the host to the serial port. */
  usb({ hex }) {
    this.running().usb.send(fromHex(hex));
  }

  /** The cable in or out; a program that fetches what the board sends, or does not; DTR up or down. */
  cable({ plugged, fetching, dtr }) {
    const { usb } = this.running();
    if (plugged !== undefined) usb.plug(plugged);
    if (fetching !== undefined) usb.fetch(fetching);
    if (dtr !== undefined) usb.setDtr(dtr);
  }

  /** The level that a pin sees from outside. */
  input({ pin, high }) {
    this.running().mcu.gpio[pin].setInputValue(high);
  }

  /** Plans a power cut at the `nth` flash operation from now: see `FlashChip`. */
  cut({ on, nth, when, bytes, seed }) {
    this.chip.cut = { on, nth, when, bytes, seed };
  }

  /** How long flash operations take. */
  flashTimes({ sector_erase_us, page_program_us }) {
    this.chip.times = { sector_erase_us, page_program_us };
  }

  /** Reads the flash. */
  readFlash({ address, length }) {
    return { hex: Buffer.from(this.chip.contents.subarray(address, address + length)).toString('hex') };
  }

  /** Reads the RAM; what was never written since power came is 0. */
  readRam({ address, length }) {
    const at = address - RAM;
    return { hex: Buffer.from(this.running().mcu.sram.subarray(at, at + length)).toString('hex') };
  }

  /** Writes the flash as it never happens on a board: damage. */
  writeFlash({ address, hex }) {
    this.chip.contents.set(fromHex(hex), address);
  }

  /** The program goes no further from now on; interrupts are served. */
  hang() {
    this.running().hang();
  }

  /** Leaves the running DMA transfer so many more bytes, as after days. */
  ageTransfer({ channel, left }) {
    this.running().mcu.dma.channels[channel].transCount = left;
  }

  /** Pins that are driven high, and the line's settings. */
  state() {
    return this.running().state;
  }
}

const board = new Board(readFileSync(process.argv[2]));
const COMMANDS = [
  ...['powerOn', 'powerOff', 'run', 'gauge', 'usb', 'cable', 'input', 'cut', 'flashTimes', 'readFlash', 'writeFlash'],
  ...['readRam', 'hang', 'ageTransfer', 'state'],
];

for await (const line of createInterface({ input: process.stdin })) {
  const { command, ...parameters } = JSON.parse(line);
  let answer;
  try {
    if (!COMMANDS.includes(command)) throw new Error(`no such command: ${command}`);
    answer = { result: board[command](parameters) ?? null };
  } catch (error) {
    answer = { error: error.stack };
  }
  const { events } = board;
  board.events = [];
  process.stdout.write(`${JSON.stringify({ ...answer, now: Math.round(board.now), cycles: board.cycles, events })}\n`);
}
