// What the harness needs of an ELF file (32-bit, little-endian): its loadable segments and its symbols.
// Source of the layout: Tool Interface Standard, Executable and Linking Format, version 1.2 (1995).

const LOADABLE = 1;
const SYMBOL_TABLE = 2;
const SYMBOL_SIZE = 16;

/** The loadable segments, as `{ physical, bytes }`. */
export function segments(elf) {
  const found = [];
  const [at, size, count] = [elf.readUInt32LE(28), elf.readUInt16LE(42), elf.readUInt16LE(44)];
  for (let header = at; header < at + count * size; header += size) {
    const [offset, physical, length] = [4, 12, 16].map((field) => elf.readUInt32LE(header + field));
    if (elf.readUInt32LE(header) === LOADABLE && length > 0)
      found.push({ physical, bytes: elf.subarray(offset, offset + length) });
  }
  return found;
}

/** The address of the symbol `name`, or undefined. */
export function symbol(elf, name) {
  const [at, size, count] = [elf.readUInt32LE(32), elf.readUInt16LE(46), elf.readUInt16LE(48)];
  const section = (index) => {
    const header = at + index * size;
    const [type, offset, length, link] = [4, 16, 20, 24].map((field) => elf.readUInt32LE(header + field));
    return { type, offset, length, link };
  };
  for (let index = 0; index < count; index++) {
    const table = section(index);
    if (table.type !== SYMBOL_TABLE) continue;
    const names = section(table.link).offset;
    for (let entry = table.offset; entry < table.offset + table.length; entry += SYMBOL_SIZE) {
      const start = names + elf.readUInt32LE(entry);
      if (elf.toString('latin1', start, elf.indexOf(0, start)) === name) return elf.readUInt32LE(entry + 4);
    }
  }
  return undefined;
}
