// The gauge's line: what the emulator's UART lacks, and a gauge that sends bytes at its own pace.

const DATA = 0x00;
const RECEIVE_STATUS = 0x04;
const FIFO_LEVEL = 0x34;
const DMA_CONTROL = 0x48;
const RECEIVE_BY_DMA = 1 << 0;

const SENT = 1 << 5;
const FRAMING_ERROR = 1 << 7;
const PARITY_ERROR = 1 << 8;
const OVERRUN_ERROR = 1 << 10;

/** How far the two ends' rates may differ: half a bit in a character of ten. */
const RATE_TOLERANCE = 0.05;

/** The image's idea of the line, as its registers say it. */
export function lineSettings(uart) {
  const control = uart.lineCtrlRegister;
  const parity = control & (1 << 1) ? (control & (1 << 2) ? 'even' : 'odd') : 'none';
  return {
    baud: uart.baudDivider ? uart.baudRate : 0,
    data_bits: uart.wordLength,
    parity,
    stop_bits: control & (1 << 3) ? 2 : 1,
  };
}

/** Adds to a UART what the emulator lacks: acknowledged transmit interrupts, plain registers, DMA requests, overruns. */
export function completeUart(mcu, uart, report) {
  const read = uart.readUint32.bind(uart);
  const write = uart.writeUint32.bind(uart);
  const feed = uart.feedByte.bind(uart);
  const plain = { [RECEIVE_STATUS]: 0, [FIFO_LEVEL]: 0, [DMA_CONTROL]: 0 };
  uart.checkInterrupts = () => mcu.setInterrupt(uart.irq, !!(uart.interruptStatus & uart.interruptMask));
  uart.feedByte = (byte) => {
    if (uart.rxFIFO.full) {
      uart.interruptStatus |= OVERRUN_ERROR;
      report({ kind: 'overrun' });
      return;
    }
    feed(byte);
    if (plain[DMA_CONTROL] & RECEIVE_BY_DMA) mcu.dma.setDREQ(uart.dreq.rx);
  };
  uart.readUint32 = (offset) => {
    if (offset in plain) return plain[offset];
    const value = read(offset);
    if (offset === DATA && uart.rxFIFO.empty) mcu.dma.clearDREQ(uart.dreq.rx);
    return value;
  };
  uart.writeUint32 = (offset, value) => {
    if (offset in plain) {
      plain[offset] = value;
      return;
    }
    write(offset, value);
    if (offset === DATA) {
      uart.interruptStatus |= SENT;
      uart.checkInterrupts();
    }
  };
}

/** A gauge on the receiving pin: a queue of bytes, sent one a character time whether the station keeps up or not. */
export class Gauge {
  constructor(mcu, uart, report) {
    Object.assign(this, { uart, report });
    this.queue = [];
    this.settings = { baud: 9600, data_bits: 8, parity: 'none', stop_bits: 1 };
    this.alarm = mcu.clock.createAlarm(() => this.arrive());
    this.sending = false;
  }

  send(bytes, settings) {
    Object.assign(this.settings, settings);
    this.queue.push(...bytes);
    if (!this.sending && this.queue.length) this.begin();
  }

  get characterNanos() {
    const { baud, data_bits, parity, stop_bits } = this.settings;
    return ((1 + data_bits + (parity === 'none' ? 0 : 1) + stop_bits) * 1e9) / baud;
  }

  begin() {
    this.sending = true;
    this.alarm.schedule(this.characterNanos);
  }

  arrive() {
    const byte = this.queue.shift();
    this.sending = false;
    if (this.uart.enabled && this.uart.rxEnabled) this.deliver(byte & ((1 << this.settings.data_bits) - 1));
    if (byte === 0x0a) this.report({ kind: 'line-end' });
    if (this.queue.length) this.begin();
    else this.report({ kind: 'gauge-quiet' });
  }

  /** Two ends that disagree: the receiver sees a wrong byte and says so. */
  deliver(byte) {
    const theirs = lineSettings(this.uart);
    const ours = this.settings;
    const rate = Math.abs(theirs.baud / ours.baud - 1);
    if (rate > RATE_TOLERANCE || theirs.data_bits !== ours.data_bits) {
      this.uart.interruptStatus |= FRAMING_ERROR;
      this.uart.feedByte(byte ^ 0xa5);
    } else {
      if (theirs.parity !== ours.parity && theirs.parity !== 'none') this.uart.interruptStatus |= PARITY_ERROR;
      this.uart.feedByte(byte);
    }
  }
}
