// The Pico's flash chip: NOR rules, the time its operations take, and power that fails in the middle of one.

export const FLASH_SIZE = 2 * 1024 * 1024;

const ERASED = 0xff;
const READ_UNIQUE_ID = 0x4b; // Winbond's instruction (from memory, W25Q16JV data sheet)
const UNIQUE_ID_DUMMY_BYTES = 4;

/** Times of a W25Q16JV, from memory of its data sheet, in microseconds: typical and most. */
export const FLASH_TIMES = {
  typical: { sector_erase_us: 45_000, page_program_us: 400 },
  most: { sector_erase_us: 400_000, page_program_us: 3_000 },
};

const SECTOR = 4096;
const PAGE = 256;

/** A small repeatable sequence of bits (xorshift32, Marsaglia 2003). */
function bits(seed) {
  let state = seed >>> 0 || 1;
  return () => {
    state ^= state << 13;
    state ^= state >>> 17;
    state ^= state << 5;
    return (state >>> 0) & 0xff;
  };
}

export class FlashChip {
  /** `report(event)` hears of each operation, `stall(nanos)` lets the world go on meanwhile, `powerLost()` ends it. */
  constructor({ contents, uniqueId, report, stall, powerLost }) {
    Object.assign(this, { contents, uniqueId, report, stall, powerLost });
    this.times = FLASH_TIMES.typical;
    /** The planned power cut: `{ on, nth, when, bytes, seed }`, or null. */
    this.cut = null;
  }

  erase(address, length) {
    this.check(address, length, SECTOR);
    const time = (length / SECTOR) * this.times.sector_erase_us;
    this.operate('erase', address, new Uint8Array(length).fill(ERASED), time);
  }

  /** Programs whole pages; a bit can only fall. */
  program(address, data) {
    this.check(address, data.length, PAGE);
    const result = data.map((byte, i) => byte & this.contents[address + i]);
    this.operate('program', address, result, (data.length / PAGE) * this.times.page_program_us);
  }

  /** What the chip answers to an instruction after its address bytes, or undefined. */
  answer(instruction) {
    if (instruction !== READ_UNIQUE_ID) return undefined;
    return [...new Uint8Array(UNIQUE_ID_DUMMY_BYTES), ...this.uniqueId];
  }

  check(address, length, unit) {
    if (address % unit || length % unit || address + length > FLASH_SIZE)
      throw new Error(`flash operation off the chip's grid: ${length} bytes at 0x${address.toString(16)}`);
  }

  operate(operation, address, result, time_us) {
    this.report({ kind: 'flash', operation, address, length: result.length });
    const cut = this.cut;
    const cutNow = cut && (cut.on === 'any' || cut.on === operation) && --cut.nth === 0;
    if (cutNow && cut.when === 'before') return this.fail();
    if (cutNow && cut.when === 'inside') {
      this.stall((time_us * 1000) / 2);
      this.tear(address, result, cut);
      return this.fail();
    }
    this.stall(time_us * 1000);
    this.contents.set(result, address);
    if (cutNow) return this.fail();
    this.report({ kind: 'flash-done', operation, address });
  }

  /** The first `bytes` are done; of the rest, nothing is, or with a seed about half of the bits that should change. */
  tear(address, result, { bytes = 0, seed }) {
    const random = seed === undefined ? () => 0 : bits(seed);
    for (let i = 0; i < result.length; i++) {
      const changes = this.contents[address + i] ^ result[i];
      this.contents[address + i] ^= i < bytes ? changes : changes & random();
    }
  }

  fail() {
    this.cut = null;
    this.powerLost();
  }
}
