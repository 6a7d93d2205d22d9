// The computer at the other end of the USB cable: enumerates the board and opens its serial port.
// Descriptors and requests: USB 2.0 specification, chapter 9; USB CDC PSTN subclass 1.2, section 6.3.

const PACKET = 64;
/** What a host's serial driver asks for at once: it hands bytes on when this is full or a packet is short. */
const TRANSFER = 2 * PACKET;
const STEP_NANOS = 1_000_000;
const CONTROL_TIMEOUT_NANOS = 500_000_000;

const AVAILABLE = 1 << 10;
const inControl = (endpoint) => 0x80 + endpoint * 8; // place in the controller's memory
const outControl = (endpoint) => 0x84 + endpoint * 8;

const GET_DESCRIPTOR = 6;
const SET_ADDRESS = 5;
const SET_CONFIGURATION = 9;
const SET_CONTROL_LINE_STATE = 0x22;
const DEVICE = 1;
const CONFIGURATION = 2;
const STRING = 3;
const INTERFACE = 4;
const ENDPOINT = 5;
const CDC_DATA = 10;
const BULK = 2;
const ENGLISH_US = 0x0409;

const setup = (type, request, value, index, length) => {
  const packet = new DataView(new ArrayBuffer(8));
  packet.setUint8(0, type);
  packet.setUint8(1, request);
  packet.setUint16(2, value, true);
  packet.setUint16(4, index, true);
  packet.setUint16(6, length, true);
  return new Uint8Array(packet.buffer);
};

/** Real silicon clears AVAILABLE when a packet has arrived; the emulator clears it when the buffer is armed. */
function keepAvailableUntilArrival(mcu) {
  const { usbCtrl: usb, usbDPRAMView: memory } = mcu;
  const finishRead = usb.finishRead.bind(usb);
  const updated = usb.DPRAMUpdated.bind(usb);
  usb.finishRead = (endpoint, bytes) => {
    const at = outControl(endpoint);
    memory.setUint32(at, memory.getUint32(at, true) & ~AVAILABLE, true);
    finishRead(endpoint, bytes);
  };
  usb.DPRAMUpdated = (offset, value) => {
    updated(offset, value);
    const isOut = offset >= outControl(0) && offset <= outControl(15) && offset & 4;
    if (isOut && value & AVAILABLE) memory.setUint32(offset, value | AVAILABLE, true);
  };
}

export class UsbHost {
  constructor(mcu, report) {
    this.usb = mcu.usbCtrl;
    this.memory = mcu.usbDPRAMView;
    this.report = report;
    this.plugged = true;
    this.enabled = false;
    this.reading = true;
    keepAvailableUntilArrival(mcu);
    this.holdPacketsNobodyFetches();
    this.usb.onUSBEnabled = () => {
      this.enabled = true;
      if (this.plugged) this.usb.resetDevice();
    };
    this.usb.onResetReceived = () => this.plugged && this.enumerate();
    this.usb.onEndpointWrite = (endpoint, bytes) => this.fromDevice(endpoint, bytes);
    this.usb.onEndpointRead = (endpoint, size) => this.deviceListens(endpoint, size);
    this.next = mcu.clock.createAlarm(() => this.startControl());
    this.timeout = mcu.clock.createAlarm(() => this.controlDone('stalled'));
    this.reset();
  }

  /** Forgets the session, as after a reset of the bus. */
  reset() {
    this.next.cancel();
    this.timeout.cancel();
    this.control = [];
    this.current = null;
    this.stepping = false;
    this.inEndpoint = this.outEndpoint = -1;
    this.outQueue = [];
    this.armed = null;
    this.held = null;
    this.received = [];
    this.connected = false;
  }

  /** Puts the cable in or pulls it. */
  plug(plugged) {
    if (plugged === this.plugged) return;
    this.plugged = plugged;
    this.reset();
    if (plugged && this.enabled) this.usb.resetDevice();
  }

  /** Whether a program on the computer fetches what the board sends. */
  fetch(reading) {
    this.reading = reading;
    if (reading && this.held !== null) {
      const offset = this.held;
      this.held = null;
      this.usb.DPRAMUpdated(offset, this.memory.getUint32(offset, true));
    }
  }

  /** Sends bytes to the serial port, as soon as the board takes them. */
  send(bytes) {
    this.outQueue.push(...bytes);
    this.pump();
  }

  /** A program opens the port (raises DTR) or closes it. */
  setDtr(dtr) {
    this.ask(setup(0x21, SET_CONTROL_LINE_STATE, dtr ? 3 : 0, 0, 0), () => {});
  }

  holdPacketsNobodyFetches() {
    const updated = this.usb.DPRAMUpdated.bind(this.usb);
    this.usb.DPRAMUpdated = (offset, value) => {
      const isData = this.inEndpoint > 0 && offset === inControl(this.inEndpoint);
      if (isData && value & AVAILABLE && !(this.reading && this.plugged)) this.held = offset;
      else updated(offset, value);
    };
  }

  enumerate() {
    this.reset();
    const identity = {};
    const read = (type, index, length, then) =>
      this.ask(setup(0x80, GET_DESCRIPTOR, (type << 8) | index, type === STRING ? ENGLISH_US : 0, length), then);
    const readString = (name, index) => read(STRING, index, 255, (bytes) => (identity[name] = text(bytes)));
    read(DEVICE, 0, 18, (device) => {
      identity.vendor = device[8] | (device[9] << 8);
      identity.product_id = device[10] | (device[11] << 8);
      this.ask(setup(0, SET_ADDRESS, 1, 0, 0), () => {});
      read(CONFIGURATION, 0, 9, (head) => {
        read(CONFIGURATION, 0, head[2] | (head[3] << 8), (all) => Object.assign(this, dataEndpoints(all)));
        readString('manufacturer', device[14]);
        readString('product', device[15]);
        readString('serial_number', device[16]);
        this.ask(setup(0, SET_CONFIGURATION, 1, 0, 0), () => {});
        this.ask(setup(0x21, SET_CONTROL_LINE_STATE, 3, 0, 0), () => {
          this.connected = true;
          this.report({ kind: 'connected', ...identity });
          this.pump();
        });
      });
    });
  }

  ask(packet, then) {
    this.control.push({ packet, then, bytes: [] });
    if (!this.current && !this.stepping) this.step();
  }

  /** The next request follows a millisecond later, in the next frame. */
  step() {
    this.stepping = true;
    this.next.schedule(STEP_NANOS);
  }

  startControl() {
    this.stepping = false;
    if (this.current || !this.plugged) return;
    this.current = this.control.shift() ?? null;
    if (!this.current) return;
    this.timeout.schedule(CONTROL_TIMEOUT_NANOS);
    this.usb.sendSetupPacket(this.current.packet);
  }

  controlDone(outcome) {
    const { then, bytes } = this.current;
    this.current = null;
    this.timeout.cancel();
    if (outcome === 'stalled') this.report({ kind: 'usb-request-stalled' });
    else then(bytes);
    if (this.control.length) this.step();
  }

  fromDevice(endpoint, bytes) {
    if (!this.plugged) return;
    if (endpoint === 0) this.controlPacket(bytes);
    else if (endpoint === this.inEndpoint) this.dataPacket(bytes);
  }

  controlPacket(bytes) {
    if (!this.current) return;
    const asksForData = this.current.packet[0] & 0x80;
    if (asksForData) this.current.bytes.push(...bytes);
    else return this.controlDone('done');
    const wanted = this.current.packet[6] | (this.current.packet[7] << 8);
    this.current.whole = bytes.length < PACKET || this.current.bytes.length >= wanted;
    this.finishRead();
  }

  /** A read is done when its data are whole and the board waits for the empty packet behind them. */
  finishRead() {
    if (!this.current?.whole || !this.current.acknowledge) return;
    this.usb.endpointReadDone(0, new Uint8Array(0));
    this.controlDone('done');
  }

  dataPacket(bytes) {
    this.received.push(...bytes);
    if (bytes.length === PACKET && this.received.length < TRANSFER) return;
    if (this.received.length) this.report({ kind: 'usb', hex: Buffer.from(this.received).toString('hex') });
    this.received = [];
  }

  deviceListens(endpoint, size) {
    if (endpoint === 0) {
      // The emulator tells of the board's readiness a little before the data that came first.
      if (this.current) this.current.acknowledge = true;
      this.finishRead();
    } else {
      this.armed = { endpoint, size };
      this.pump();
    }
  }

  /** Answers a listening endpoint only when there are bytes: otherwise the host has nothing to send yet. */
  pump() {
    if (!this.plugged || !this.connected || !this.armed || !this.outQueue.length) return;
    if (this.armed.endpoint !== this.outEndpoint) return;
    const { endpoint, size } = this.armed;
    this.armed = null;
    this.usb.endpointReadDone(endpoint, Uint8Array.from(this.outQueue.splice(0, Math.min(size, PACKET))));
  }
}

/** A string descriptor's text. */
const text = (bytes) => Buffer.from(bytes.slice(2)).toString('utf16le');

/** The two bulk endpoints of the CDC data interface in a configuration descriptor. */
function dataEndpoints(descriptors) {
  const found = { inEndpoint: -1, outEndpoint: -1 };
  let isData = false;
  for (let at = 0; at + 1 < descriptors.length; at += Math.max(descriptors[at], 1)) {
    const type = descriptors[at + 1];
    if (type === INTERFACE) isData = descriptors[at + 5] === CDC_DATA;
    if (type !== ENDPOINT || !isData || (descriptors[at + 3] & 3) !== BULK) continue;
    found[descriptors[at + 2] & 0x80 ? 'inEndpoint' : 'outEndpoint'] = descriptors[at + 2] & 0xf;
  }
  return found;
}
