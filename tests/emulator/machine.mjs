// One power cycle of a Raspberry Pi Pico: an RP2040 with its flash chip, its USB cable and a gauge.

import { GPIOPinState, RP2040 } from 'rp2040js';

import { HANG_ADDRESS, installBootRom, installFlashController } from './boot_rom.mjs';
import { segments, symbol } from './elf.mjs';
import { installMissingRegisters } from './registers.mjs';
import { takeLog } from './rtt.mjs';
import { Gauge, completeUart, lineSettings } from './uart.mjs';
import { UsbHost } from './usb_host.mjs';

const FLASH = 0x10000000;
const FLASH_END = 0x11000000;
const VECTORS = FLASH + 0x100; // behind the second-stage boot loader, which is skipped
const WATCHDOG = 0x40058;
const AIRCR = 0xd0c;
const SYSRESETREQ = 1 << 2;

const CYCLE_NANOS = 8; // 125 MHz
const LOG_EVERY_NANOS = 1_000_000;
const PINS = 30;

/** The USB driver clears all registers at its start; a zero for one that the emulator lacks means nothing. */
const CLEARING = /^Unimplemented peripheral write to 0x[0-9a-f]+: 0x0$/;

/** The emulator's messages: SEV is told here only, and the core must remember it; unknown accesses are reported. */
class Messages {
  constructor(core, report) {
    Object.assign(this, { core, report });
  }
  debug() {}
  info(_, message) {
    if (message === 'SEV') this.core.eventRegistered = true;
  }
  warn(component, message) {
    if (!CLEARING.test(message)) this.report({ kind: 'emulator-warning', message: `${component}: ${message}` });
  }
  error(component, message) {
    this.warn(component, message);
  }
}

export class Machine {
  /** `report(event)` hears what happens; `chip` keeps its contents over power cycles. */
  constructor({ elf, chip, report, ram }) {
    this.report = report;
    this.mcu = new RP2040();
    this.clock = this.mcu.clock;
    /** Why this power cycle is over: 'power-lost', 'reset' or null. */
    this.over = null;
    this.mcu.logger = new Messages(this.mcu.core, report);
    if (ram) this.mcu.sram.set(ram);
    this.load(elf, chip);
    installBootRom(this.mcu, chip);
    installFlashController(this.mcu, chip);
    installMissingRegisters(this.mcu);
    this.connect(elf);
  }

  /** The image goes into the chip; the core's view of the flash is the chip's contents. */
  load(elf, chip) {
    for (const { physical, bytes } of segments(elf))
      if (physical >= FLASH && physical < FLASH_END) chip.contents.set(bytes, physical - FLASH);
    const { mcu } = this;
    mcu.flash = chip.contents;
    mcu.flash16 = new Uint16Array(chip.contents.buffer);
    mcu.flashView = new DataView(chip.contents.buffer);
    mcu.core.VTOR = VECTORS;
    mcu.core.SP = mcu.readUint32(VECTORS);
    mcu.core.PC = mcu.readUint32(VECTORS + 4) & ~1;
  }

  connect(elf) {
    const { mcu, report } = this;
    mcu.uart.forEach((uart) => completeUart(mcu, uart, report));
    this.gauge = new Gauge(mcu, mcu.uart[0], report);
    this.usb = new UsbHost(mcu, report);
    for (let pin = 0; pin < PINS; pin++) {
      mcu.gpio[pin].setInputValue(true); // buttons are open, and pulled up
      mcu.gpio[pin].addListener((state) => {
        if (state <= GPIOPinState.High) report({ kind: 'pin', pin, high: state === GPIOPinState.High });
      });
    }
    const watchdog = mcu.peripherals[WATCHDOG];
    watchdog.onWatchdogTrigger = () => {
      watchdog.alarm.enable = false; // it would go off again and again at this moment
      this.end('reset', 'watchdog');
    };
    const { ppb } = mcu;
    const write = ppb.writeUint32.bind(ppb);
    ppb.writeUint32 = (offset, value) => {
      if (offset === AIRCR) value & SYSRESETREQ && this.end('reset', 'system');
      else write(offset, value);
    };
    this.log = symbol(elf, '_SEGGER_RTT');
    this.logAlarm = this.clock.createAlarm(() => {
      this.takeLog();
      this.logAlarm.schedule(LOG_EVERY_NANOS);
    });
    this.logAlarm.schedule(LOG_EVERY_NANOS);
  }

  takeLog() {
    const bytes = this.log && takeLog(this.mcu, this.log);
    if (bytes) this.report({ kind: 'log', hex: bytes.toString('hex') });
  }

  end(over, cause) {
    if (this.over) return;
    this.takeLog();
    this.over = over;
    this.report({ kind: over, cause });
  }

  /** Runs for `nanos`, or until `stop()` says so, or until this power cycle is over. */
  run(nanos, stop) {
    const { clock } = this;
    const { core } = this.mcu;
    const end = clock.nanos + nanos;
    while (clock.nanos < end && !this.over && !stop()) {
      if (core.waiting) {
        const next = clock.nextAlarm ? clock.nanosToNextAlarm : Infinity;
        clock.tick(Math.max(0, Math.min(next, end - clock.nanos)));
      } else {
        clock.tick(core.executeInstruction() * CYCLE_NANOS);
      }
    }
  }

  /** Lets the world go on for `nanos` while the core stands still. */
  stall(nanos) {
    this.clock.tick(nanos);
  }

  /** The program goes no further from now on; interrupts are served. */
  hang() {
    this.mcu.core.PC = HANG_ADDRESS;
    this.mcu.core.waiting = false;
  }

  get state() {
    return {
      line: lineSettings(this.mcu.uart[0]),
      pins: this.mcu.gpio.map((pin) => pin.value === GPIOPinState.High),
    };
  }
}
