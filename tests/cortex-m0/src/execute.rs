//! The instructions at work.

use std::sync::Arc;

use super::decode::{self, Condition, Instruction, Register};
use super::memory::Memory;

/// Why the core stopped.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Stop {
    /// A breakpoint of this code; the next instruction is the one behind it.
    Breakpoint(u8),
    /// An instruction at this address that is undefined, or reads or writes where it cannot.
    Fault(u32),
    /// It executed as many instructions as it was allowed.
    Limit,
}

const SP: usize = 13;
const LR: usize = 14;

/// Registers, flags, memory and code.
#[derive(Clone, Debug)]
pub(super) struct Core {
    registers: Registers,
    /// The index of the next instruction's halfword.
    next: u32,
    executed: u64,
    base: u32,
    instructions: Arc<[Instruction]>,
    pub(super) memory: Memory,
}

/// R0 to R14, and the flags.
#[derive(Clone, Debug)]
struct Registers {
    values: [u32; 16],
    /// The latest result, of which N and Z are.
    result: u32,
    carry: bool,
    overflow: bool,
}

impl Core {
    /// A core that starts by the vector table at the front of `code`; `None` if there is none.
    pub(super) fn new(code: Vec<u8>, base: u32) -> Option<Self> {
        let instructions = decode::all(&code, base).into();
        let memory = Memory::new(code, base);
        let mut registers = Registers { values: [0; 16], result: 1, carry: false, overflow: false };
        registers.values[SP] = memory.word(base)?;
        let next = memory.word(base + 4)?.wrapping_sub(base) / 2;
        Some(Self { registers, next, executed: 0, base, instructions, memory })
    }

    pub(super) fn register(&self, number: Register) -> u32 {
        self.registers.get(number)
    }

    pub(super) fn set_register(&mut self, number: Register, value: u32) {
        self.registers.set(number, value);
    }

    pub(super) fn executed(&self) -> u64 {
        self.executed
    }

    /// Where it is.
    pub(super) fn address(&self) -> u32 {
        self.base.wrapping_add(self.next.wrapping_mul(2))
    }

    /// Lets the latest instruction be executed once more.
    pub(super) fn again(&mut self) {
        self.next = self.next.wrapping_sub(1);
    }

    /// Runs until something stops it, or for so many instructions.
    pub(super) fn run(&mut self, limit: u64) -> Stop {
        let instructions = Arc::clone(&self.instructions);
        let (base, mut next, mut left) = (self.base, self.next, limit);
        let stop = loop {
            if left == 0 {
                break Stop::Limit;
            }
            left -= 1;
            let here = next;
            let instruction = instructions.get(here as usize).copied().unwrap_or(Instruction::Undefined);
            next = here.wrapping_add(1);
            if let Instruction::Breakpoint { code } = instruction {
                break Stop::Breakpoint(code);
            }
            let done = execute(instruction, base, here, &mut next, &mut self.registers, &mut self.memory);
            if done.is_none() {
                next = here;
                break Stop::Fault(base.wrapping_add(here.wrapping_mul(2)));
            }
        };
        self.next = next;
        self.executed += limit - left;
        stop
    }
}

/// `None` is a fault. One flat `match`, long as it is: each instruction costs one jump.
#[inline(always)]
fn execute(
    instruction: Instruction,
    base: u32,
    here: u32,
    next: &mut u32,
    r: &mut Registers,
    memory: &mut Memory,
) -> Option<()> {
    use Instruction as I;
    // An address whose lowest bit says Thumb, as it must.
    let exchange = |address: u32| (address & 1 == 1).then_some(address.wrapping_sub(base) / 2);
    // With the program counter two instructions ahead.
    let any = |r: &Registers, number: Register| match number {
        15 => base.wrapping_add(here.wrapping_mul(2)).wrapping_add(4),
        _ => r.get(number),
    };
    match instruction {
        I::LslImmediate { d, m, by } => {
            let value = r.get(m);
            if by > 0 {
                r.carry = value >> (32 - by) & 1 == 1;
            }
            r.set_with_flags(d, value << by);
        }
        I::LsrImmediate { d, m, by } => r.shift_right(d, r.get(m), by.into()),
        I::AsrImmediate { d, m, by } => r.shift_signed(d, r.get(m), by.into()),
        I::Add { d, n, m } => r.add(d, r.get(n), r.get(m), false),
        I::Subtract { d, n, m } => r.add(d, r.get(n), !r.get(m), true),
        I::AddImmediate { d, n, value } => r.add(d, r.get(n), value.into(), false),
        I::SubtractImmediate { d, n, value } => r.add(d, r.get(n), !u32::from(value), true),
        I::MoveImmediate { d, value } => r.set_with_flags(d, value.into()),
        I::CompareImmediate { n, value } => drop_sum(r.sum(r.get(n), !u32::from(value), true)),
        I::And { d, m } => r.set_with_flags(d, r.get(d) & r.get(m)),
        I::Eor { d, m } => r.set_with_flags(d, r.get(d) ^ r.get(m)),
        I::LslRegister { d, m } => r.shift_left(d, r.get(d), r.get(m) & 0xff),
        I::LsrRegister { d, m } => match r.get(m) & 0xff {
            0 => r.result = r.get(d),
            by => r.shift_right(d, r.get(d), by),
        },
        I::AsrRegister { d, m } => match r.get(m) & 0xff {
            0 => r.result = r.get(d),
            by => r.shift_signed(d, r.get(d), by),
        },
        I::Adc { d, m } => r.add(d, r.get(d), r.get(m), r.carry),
        I::Sbc { d, m } => r.add(d, r.get(d), !r.get(m), r.carry),
        I::Ror { d, m } => {
            let by = r.get(m) & 0xff;
            let rotated = r.get(d).rotate_right(by & 31);
            if by > 0 {
                r.carry = rotated >> 31 == 1;
            }
            r.set_with_flags(d, rotated);
        }
        I::Tst { d, m } => r.result = r.get(d) & r.get(m),
        I::Rsb { d, m } => r.add(d, 0, !r.get(m), true),
        I::Compare { d, m } | I::CompareHigh { n: d, m } => drop_sum(r.sum(r.get(d), !r.get(m), true)),
        I::CompareNegative { d, m } => drop_sum(r.sum(r.get(d), r.get(m), false)),
        I::Orr { d, m } => r.set_with_flags(d, r.get(d) | r.get(m)),
        I::Mul { d, m } => r.set_with_flags(d, r.get(d).wrapping_mul(r.get(m))),
        I::Bic { d, m } => r.set_with_flags(d, r.get(d) & !r.get(m)),
        I::Mvn { d, m } => r.set_with_flags(d, !r.get(m)),
        I::AddHigh { d, m } => {
            let sum = any(r, d).wrapping_add(any(r, m));
            r.set_any(d, sum, base, next);
        }
        I::MoveHigh { d, m } => {
            let value = any(r, m);
            r.set_any(d, value, base, next);
        }
        I::BranchExchange { m, links } => {
            let to = exchange(r.get(m))?;
            if links {
                r.values[LR] = base.wrapping_add(next.wrapping_mul(2)) | 1;
            }
            *next = to;
        }
        I::Constant { d, value } => r.set(d, value),
        I::LoadWord { t, n, offset } => r.set(t, memory.word(r.at(n, offset))?),
        I::LoadHalf { t, n, offset } => r.set(t, memory.half(r.at(n, offset))?.into()),
        I::LoadByte { t, n, offset } => r.set(t, memory.byte(r.at(n, offset))?.into()),
        I::StoreWord { t, n, offset } => memory.write(r.at(n, offset), r.get(t).to_le_bytes())?,
        I::StoreHalf { t, n, offset } => memory.write(r.at(n, offset), (r.get(t) as u16).to_le_bytes())?,
        I::StoreByte { t, n, offset } => memory.write(r.at(n, offset), [r.get(t) as u8])?,
        I::LoadWordAt { t, n, m } => r.set(t, memory.word(r.both(n, m))?),
        I::LoadHalfAt { t, n, m } => r.set(t, memory.half(r.both(n, m))?.into()),
        I::LoadByteAt { t, n, m } => r.set(t, memory.byte(r.both(n, m))?.into()),
        I::LoadSignedHalfAt { t, n, m } => r.set(t, memory.half(r.both(n, m))? as i16 as u32),
        I::LoadSignedByteAt { t, n, m } => r.set(t, memory.byte(r.both(n, m))? as i8 as u32),
        I::StoreWordAt { t, n, m } => memory.write(r.both(n, m), r.get(t).to_le_bytes())?,
        I::StoreHalfAt { t, n, m } => memory.write(r.both(n, m), (r.get(t) as u16).to_le_bytes())?,
        I::StoreByteAt { t, n, m } => memory.write(r.both(n, m), [r.get(t) as u8])?,
        I::LoadStack { t, offset } => r.set(t, memory.word(r.stack(offset))?),
        I::StoreStack { t, offset } => memory.write(r.stack(offset), r.get(t).to_le_bytes())?,
        I::StackAddress { d, offset } => r.set(d, r.stack(offset)),
        I::MoveStack { by } => r.values[SP] = r.values[SP].wrapping_add_signed(by.into()),
        I::ExtendSignedHalf { d, m } => r.set(d, r.get(m) as i16 as u32),
        I::ExtendSignedByte { d, m } => r.set(d, r.get(m) as i8 as u32),
        I::ExtendHalf { d, m } => r.set(d, r.get(m) & 0xffff),
        I::ExtendByte { d, m } => r.set(d, r.get(m) & 0xff),
        I::Reverse { d, m } => r.set(d, r.get(m).swap_bytes()),
        I::ReverseHalves { d, m } => r.set(d, r.get(m).swap_bytes().rotate_left(16)),
        I::ReverseSignedHalf { d, m } => r.set(d, (r.get(m) as i16).swap_bytes() as u32),
        I::Push { registers } => {
            let address = r.values[SP].wrapping_sub(4 * registers.count_ones());
            r.values[SP] = address;
            store_many(r, memory, address, registers)?;
        }
        I::Pop { registers } => {
            let mut address = load_many(r, memory, r.values[SP], registers & 0xff)?;
            if registers >> 15 == 1 {
                *next = exchange(memory.word(address)?)?;
                address = address.wrapping_add(4);
            }
            r.values[SP] = address;
        }
        I::StoreMany { n, registers } => {
            let address = store_many(r, memory, r.get(n), registers.into())?;
            r.set(n, address);
        }
        I::LoadMany { n, registers } => {
            let address = load_many(r, memory, r.get(n), registers.into())?;
            if registers >> n & 1 == 0 {
                r.set(n, address);
            }
        }
        I::Branch { to } => *next = to,
        I::BranchIf { condition, to } => {
            if r.holds(condition) {
                *next = to;
            }
        }
        I::BranchLink { to } => {
            r.values[LR] = base.wrapping_add(next.wrapping_mul(2)).wrapping_add(2) | 1;
            *next = to;
        }
        I::Nothing { halfwords } => *next = here.wrapping_add(halfwords.into()),
        I::Breakpoint { .. } | I::Undefined => return None,
    }
    Some(())
}

/// A comparison wants the flags only.
#[inline(always)]
fn drop_sum(_: u32) {}

/// Stores the registers whose bits are set, in order, and gives the address behind them.
#[inline(always)]
fn store_many(r: &Registers, memory: &mut Memory, mut address: u32, registers: u16) -> Option<u32> {
    let mut left = registers;
    while left != 0 {
        memory.write(address, r.get(left.trailing_zeros() as Register).to_le_bytes())?;
        address = address.wrapping_add(4);
        left &= left - 1;
    }
    Some(address)
}

/// Loads the registers whose bits are set, in order, and gives the address behind them.
#[inline(always)]
fn load_many(r: &mut Registers, memory: &Memory, mut address: u32, registers: u16) -> Option<u32> {
    let mut left = registers;
    while left != 0 {
        r.set(left.trailing_zeros() as Register, memory.word(address)?);
        address = address.wrapping_add(4);
        left &= left - 1;
    }
    Some(address)
}

impl Registers {
    #[inline(always)]
    fn get(&self, number: Register) -> u32 {
        self.values[usize::from(number & 15)]
    }

    #[inline(always)]
    fn set(&mut self, number: Register, value: u32) {
        self.values[usize::from(number & 15)] = value;
    }

    /// Writing the program counter is a branch.
    #[inline(always)]
    fn set_any(&mut self, number: Register, value: u32, base: u32, next: &mut u32) {
        match number {
            15 => *next = value.wrapping_sub(base) / 2,
            13 => self.values[SP] = value & !3,
            _ => self.set(number, value),
        }
    }

    #[inline(always)]
    fn at(&self, n: Register, offset: u8) -> u32 {
        self.get(n).wrapping_add(offset.into())
    }

    #[inline(always)]
    fn both(&self, n: Register, m: Register) -> u32 {
        self.get(n).wrapping_add(self.get(m))
    }

    #[inline(always)]
    fn stack(&self, offset: u16) -> u32 {
        self.values[SP].wrapping_add(offset.into())
    }

    #[inline(always)]
    fn set_with_flags(&mut self, d: Register, value: u32) {
        self.result = value;
        self.set(d, value);
    }

    /// a + b + carry, with all flags.
    #[inline(always)]
    fn sum(&mut self, a: u32, b: u32, carry: bool) -> u32 {
        let wide = u64::from(a) + u64::from(b) + u64::from(carry);
        let sum = wide as u32;
        self.carry = wide >> 32 != 0;
        self.overflow = ((a ^ sum) & (b ^ sum)) >> 31 == 1;
        self.result = sum;
        sum
    }

    #[inline(always)]
    fn add(&mut self, d: Register, a: u32, b: u32, carry: bool) {
        let sum = self.sum(a, b, carry);
        self.set(d, sum);
    }

    #[inline(always)]
    fn shift_left(&mut self, d: Register, value: u32, by: u32) {
        let wide = if by > 32 { 0 } else { u64::from(value) << by };
        if by > 0 {
            self.carry = wide >> 32 & 1 == 1;
        }
        self.set_with_flags(d, wide as u32);
    }

    /// By 1 or more.
    #[inline(always)]
    fn shift_right(&mut self, d: Register, value: u32, by: u32) {
        self.carry = u64::from(value) >> (by - 1).min(63) & 1 == 1;
        self.set_with_flags(d, (u64::from(value) >> by.min(63)) as u32);
    }

    /// By 1 or more.
    #[inline(always)]
    fn shift_signed(&mut self, d: Register, value: u32, by: u32) {
        let value = i64::from(value as i32);
        self.carry = value >> (by - 1).min(63) & 1 == 1;
        self.set_with_flags(d, (value >> by.min(63)) as u32);
    }

    #[inline(always)]
    fn holds(&self, condition: Condition) -> bool {
        let (zero, negative) = (self.result == 0, self.result >> 31 == 1);
        match condition {
            Condition::Eq => zero,
            Condition::Ne => !zero,
            Condition::Cs => self.carry,
            Condition::Cc => !self.carry,
            Condition::Mi => negative,
            Condition::Pl => !negative,
            Condition::Vs => self.overflow,
            Condition::Vc => !self.overflow,
            Condition::Hi => self.carry && !zero,
            Condition::Ls => !self.carry || zero,
            Condition::Ge => negative == self.overflow,
            Condition::Lt => negative != self.overflow,
            Condition::Gt => !zero && negative == self.overflow,
            Condition::Le => zero || negative != self.overflow,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const EDGES: [u32; 9] =
        [0, 1, 2, 0x1234_5678, 0x7fff_ffff, 0x8000_0000, 0x8000_0001, 0xffff_fffe, 0xffff_ffff];

    /// A core with these instructions behind a vector table, and R0 and R1 set.
    fn core(instructions: &[u16], r0: u32, r1: u32) -> Core {
        let table = [memory_end(), 9].into_iter().flat_map(u32::to_le_bytes);
        let code = table.chain(instructions.iter().flat_map(|bits| bits.to_le_bytes())).collect();
        let mut core = Core::new(code, 0).expect("a vector table");
        core.set_register(0, r0);
        core.set_register(1, r1);
        core
    }

    fn memory_end() -> u32 {
        super::super::memory::RAM + 0x1000
    }

    /// N, Z, C and V.
    fn flags(core: &Core) -> [bool; 4] {
        let r = &core.registers;
        [r.holds(Condition::Mi), r.holds(Condition::Eq), r.carry, r.overflow]
    }

    /// The definitions of AddWithCarry in the ARMv6-M manual (from memory): carry if the unsigned sum does not fit, overflow if
    /// the signed one does not.
    #[test]
    fn sums_and_differences_have_the_flags_of_wide_arithmetic() {
        for a in EDGES {
            for b in EDGES {
                // ADDS R0, R0, R1 and SUBS R0, R0, R1; then ADCS and SBCS with the carry that they leave.
                for (first, second, inverts) in [(0x1840, 0x4148, false), (0x1a40, 0x4188, true)] {
                    let mut core = core(&[first, second], a, b);
                    let mut accumulator = a;
                    let mut carry = inverts;
                    for _ in 0..2 {
                        assert_eq!(core.run(1), Stop::Limit);
                        let b = if inverts { !b } else { b };
                        let wide = u64::from(accumulator) + u64::from(b) + u64::from(carry);
                        let signed = i64::from(accumulator as i32) + i64::from(b as i32) + i64::from(carry);
                        accumulator = wide as u32;
                        carry = wide > u32::MAX.into();
                        assert_eq!(core.register(0), accumulator);
                        let overflow = i32::try_from(signed).is_err();
                        assert_eq!(flags(&core), [accumulator >> 31 == 1, accumulator == 0, carry, overflow]);
                    }
                }
            }
        }
    }

    /// Shifted one bit after the other, the last bit that falls out being the carry.
    #[test]
    fn shifts_by_a_register_go_bit_by_bit() {
        type Shift = fn(u32) -> (u32, bool);
        let shifts: [(u16, Shift); 4] = [
            (0x4088, |value| (value << 1, value >> 31 == 1)),
            (0x40c8, |value| (value >> 1, value & 1 == 1)),
            (0x4108, |value| (((value as i32) >> 1) as u32, value & 1 == 1)),
            (0x41c8, |value| (value.rotate_right(1), value & 1 == 1)),
        ];
        for (bits, shift) in shifts {
            for value in EDGES {
                for by in (0..70).chain([128, 255, 256, 0xffff_ff01]) {
                    let mut core = core(&[bits], value, by);
                    assert_eq!(core.run(1), Stop::Limit);
                    let (expected, carry) = (0..by & 0xff).fold((value, false), |(value, _), _| shift(value));
                    assert_eq!(core.register(0), expected, "{bits:#x} {value:#x} by {by}");
                    assert_eq!(core.registers.carry, carry, "{bits:#x} {value:#x} by {by}");
                }
            }
        }
    }

    #[test]
    fn a_call_returns_behind_it_and_a_breakpoint_stops() {
        // BL to the third instruction; BKPT #7; BX LR.
        let mut core = core(&[0xf000, 0xf801, 0xbe07, 0x4770], 0, 0);
        assert_eq!(core.run(10), Stop::Breakpoint(7));
        assert_eq!(core.executed(), 3);
    }

    #[test]
    fn what_memory_cannot_do_is_a_fault_and_changes_nothing() {
        // LDR R0, [R1]: not aligned, and beyond RAM; STR R0, [R1]: into the code.
        for (bits, address) in [(0x6808, memory_end() + 2), (0x6808, 0x3000_0000), (0x6008, 0)] {
            let mut core = core(&[bits], 5, address);
            assert_eq!(core.run(1), Stop::Fault(8));
            assert_eq!(core.register(0), 5);
        }
        assert_eq!(core(&[0xde00], 0, 0).run(1), Stop::Fault(8), "UDF");
    }
}
