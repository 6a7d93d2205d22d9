//! From halfwords to instructions: all of ARMv6-M, as the ARMv6-M Architecture Reference Manual (ARM DDI 0419, chapter A5; from
//! memory) lists them. What depends on the instruction's own place is worked out here, once.

/// A register's number, 0 to 15.
pub(super) type Register = u8;

/// A condition, in the order of its code.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Condition {
    Eq,
    Ne,
    Cs,
    Cc,
    Mi,
    Pl,
    Vs,
    Vc,
    Hi,
    Ls,
    Ge,
    Lt,
    Gt,
    Le,
}

/// An instruction. Branch targets are indices of halfwords.
#[rustfmt::skip]
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum Instruction {
    LslImmediate { d: Register, m: Register, by: u8 },
    LsrImmediate { d: Register, m: Register, by: u8 },
    AsrImmediate { d: Register, m: Register, by: u8 },
    Add { d: Register, n: Register, m: Register },
    Subtract { d: Register, n: Register, m: Register },
    AddImmediate { d: Register, n: Register, value: u8 },
    SubtractImmediate { d: Register, n: Register, value: u8 },
    MoveImmediate { d: Register, value: u8 },
    CompareImmediate { n: Register, value: u8 },
    // Of two low registers, with flags.
    And { d: Register, m: Register },
    Eor { d: Register, m: Register },
    LslRegister { d: Register, m: Register },
    LsrRegister { d: Register, m: Register },
    AsrRegister { d: Register, m: Register },
    Adc { d: Register, m: Register },
    Sbc { d: Register, m: Register },
    Ror { d: Register, m: Register },
    Tst { d: Register, m: Register },
    Rsb { d: Register, m: Register },
    Compare { d: Register, m: Register },
    CompareNegative { d: Register, m: Register },
    Orr { d: Register, m: Register },
    Mul { d: Register, m: Register },
    Bic { d: Register, m: Register },
    Mvn { d: Register, m: Register },
    // Of any registers, without flags but for the comparison; writing 15 is a branch.
    AddHigh { d: Register, m: Register },
    CompareHigh { n: Register, m: Register },
    MoveHigh { d: Register, m: Register },
    /// BX, or BLX if it links.
    BranchExchange { m: Register, links: bool },
    /// A value that is known: a literal, or an address relative to the instruction.
    Constant { d: Register, value: u32 },
    LoadWord { t: Register, n: Register, offset: u8 },
    LoadHalf { t: Register, n: Register, offset: u8 },
    LoadByte { t: Register, n: Register, offset: u8 },
    StoreWord { t: Register, n: Register, offset: u8 },
    StoreHalf { t: Register, n: Register, offset: u8 },
    StoreByte { t: Register, n: Register, offset: u8 },
    // At the sum of two registers.
    LoadWordAt { t: Register, n: Register, m: Register },
    LoadHalfAt { t: Register, n: Register, m: Register },
    LoadByteAt { t: Register, n: Register, m: Register },
    LoadSignedHalfAt { t: Register, n: Register, m: Register },
    LoadSignedByteAt { t: Register, n: Register, m: Register },
    StoreWordAt { t: Register, n: Register, m: Register },
    StoreHalfAt { t: Register, n: Register, m: Register },
    StoreByteAt { t: Register, n: Register, m: Register },
    // Relative to the stack pointer.
    LoadStack { t: Register, offset: u16 },
    StoreStack { t: Register, offset: u16 },
    StackAddress { d: Register, offset: u16 },
    MoveStack { by: i16 },
    ExtendSignedHalf { d: Register, m: Register },
    ExtendSignedByte { d: Register, m: Register },
    ExtendHalf { d: Register, m: Register },
    ExtendByte { d: Register, m: Register },
    Reverse { d: Register, m: Register },
    ReverseHalves { d: Register, m: Register },
    ReverseSignedHalf { d: Register, m: Register },
    /// Bits 0 to 7 the low registers, 14 LR.
    Push { registers: u16 },
    /// Bits 0 to 7 the low registers, 15 PC.
    Pop { registers: u16 },
    StoreMany { n: Register, registers: u8 },
    LoadMany { n: Register, registers: u8 },
    Branch { to: u32 },
    BranchIf { condition: Condition, to: u32 },
    BranchLink { to: u32 },
    Breakpoint { code: u8 },
    /// Hints, barriers and interrupt masks, which a lone core without interrupts can pass over.
    Nothing { halfwords: u8 },
    /// What is no instruction of ARMv6-M, or needs what is not emulated.
    Undefined,
}

/// The operations of two low registers, by their code.
const ALU: [fn(Register, Register) -> Instruction; 16] = [
    |d, m| Instruction::And { d, m },
    |d, m| Instruction::Eor { d, m },
    |d, m| Instruction::LslRegister { d, m },
    |d, m| Instruction::LsrRegister { d, m },
    |d, m| Instruction::AsrRegister { d, m },
    |d, m| Instruction::Adc { d, m },
    |d, m| Instruction::Sbc { d, m },
    |d, m| Instruction::Ror { d, m },
    |d, m| Instruction::Tst { d, m },
    |d, m| Instruction::Rsb { d, m },
    |d, m| Instruction::Compare { d, m },
    |d, m| Instruction::CompareNegative { d, m },
    |d, m| Instruction::Orr { d, m },
    |d, m| Instruction::Mul { d, m },
    |d, m| Instruction::Bic { d, m },
    |d, m| Instruction::Mvn { d, m },
];

const CONDITIONS: [Condition; 14] = [
    Condition::Eq,
    Condition::Ne,
    Condition::Cs,
    Condition::Cc,
    Condition::Mi,
    Condition::Pl,
    Condition::Vs,
    Condition::Vc,
    Condition::Hi,
    Condition::Ls,
    Condition::Ge,
    Condition::Lt,
    Condition::Gt,
    Condition::Le,
];

/// The instructions that begin at each halfword of `code`, which stands at `base`.
pub(super) fn all(code: &[u8], base: u32) -> Vec<Instruction> {
    let halfword = |index: usize| {
        let bytes = code.get(2 * index..2 * index + 2)?;
        Some(u16::from_le_bytes([bytes[0], bytes[1]]))
    };
    let literal = |address: u32| {
        let at = address.checked_sub(base)? as usize;
        let bytes = code.get(at..at + 4)?;
        Some(u32::from_le_bytes([bytes[0], bytes[1], bytes[2], bytes[3]]))
    };
    let one = |index: usize| {
        let first = halfword(index)?;
        let here = index as u32;
        if first >> 11 >= 0b11101 {
            return Some(long(here, first, halfword(index + 1)?));
        }
        let ahead = (base + 2 * here + 4) & !3;
        let offset = u32::from(first & 0xff) * 4;
        let d = (first >> 8 & 7) as Register;
        Some(match first >> 11 {
            0b01001 => Instruction::Constant { d, value: literal(ahead + offset)? },
            0b10100 => Instruction::Constant { d, value: ahead + offset },
            _ => short(here, first),
        })
    };
    (0..code.len() / 2).map(|index| one(index).unwrap_or(Instruction::Undefined)).collect()
}

/// An instruction of one halfword.
fn short(here: u32, bits: u16) -> Instruction {
    use Instruction as I;
    let field = |from: u16| (bits >> from & 7) as Register;
    let (d, n, m, high) = (field(0), field(3), field(6), field(8));
    let five = (bits >> 6 & 31) as u8;
    let byte = (bits & 0xff) as u8;
    match bits >> 11 {
        0b00000 => I::LslImmediate { d, m: n, by: five },
        0b00001 => I::LsrImmediate { d, m: n, by: if five == 0 { 32 } else { five } },
        0b00010 => I::AsrImmediate { d, m: n, by: if five == 0 { 32 } else { five } },
        0b00011 => match bits >> 9 & 3 {
            0 => I::Add { d, n, m },
            1 => I::Subtract { d, n, m },
            2 => I::AddImmediate { d, n, value: m },
            _ => I::SubtractImmediate { d, n, value: m },
        },
        0b00100 => I::MoveImmediate { d: high, value: byte },
        0b00101 => I::CompareImmediate { n: high, value: byte },
        0b00110 => I::AddImmediate { d: high, n: high, value: byte },
        0b00111 => I::SubtractImmediate { d: high, n: high, value: byte },
        0b01000 if bits >> 10 & 1 == 0 => ALU[usize::from(bits >> 6 & 15)](d, n),
        0b01000 => {
            let (d, m) = (d | (bits >> 4 & 8) as Register, (bits >> 3 & 15) as Register);
            match bits >> 8 & 3 {
                0 => I::AddHigh { d, m },
                1 => I::CompareHigh { n: d, m },
                2 => I::MoveHigh { d, m },
                _ => I::BranchExchange { m, links: bits >> 7 & 1 == 1 },
            }
        }
        0b01010 | 0b01011 => match bits >> 9 & 7 {
            0 => I::StoreWordAt { t: d, n, m },
            1 => I::StoreHalfAt { t: d, n, m },
            2 => I::StoreByteAt { t: d, n, m },
            3 => I::LoadSignedByteAt { t: d, n, m },
            4 => I::LoadWordAt { t: d, n, m },
            5 => I::LoadHalfAt { t: d, n, m },
            6 => I::LoadByteAt { t: d, n, m },
            _ => I::LoadSignedHalfAt { t: d, n, m },
        },
        0b01100 => I::StoreWord { t: d, n, offset: five * 4 },
        0b01101 => I::LoadWord { t: d, n, offset: five * 4 },
        0b01110 => I::StoreByte { t: d, n, offset: five },
        0b01111 => I::LoadByte { t: d, n, offset: five },
        0b10000 => I::StoreHalf { t: d, n, offset: five * 2 },
        0b10001 => I::LoadHalf { t: d, n, offset: five * 2 },
        0b10010 => I::StoreStack { t: high, offset: u16::from(byte) * 4 },
        0b10011 => I::LoadStack { t: high, offset: u16::from(byte) * 4 },
        0b10101 => I::StackAddress { d: high, offset: u16::from(byte) * 4 },
        0b10110 | 0b10111 => miscellaneous(bits),
        0b11000 => I::StoreMany { n: high, registers: byte },
        0b11001 => I::LoadMany { n: high, registers: byte },
        0b11010 | 0b11011 => match CONDITIONS.get(usize::from(bits >> 8 & 15)) {
            Some(condition) => {
                I::BranchIf { condition: *condition, to: target(here, signed(bits.into(), 8)) }
            }
            None => I::Undefined,
        },
        0b11100 => I::Branch { to: target(here, signed(bits.into(), 11)) },
        _ => I::Undefined,
    }
}

fn miscellaneous(bits: u16) -> Instruction {
    use Instruction as I;
    let (d, m) = ((bits & 7) as Register, (bits >> 3 & 7) as Register);
    let low = bits & 0xff;
    let by = (bits & 0x7f) as i16 * 4;
    match bits >> 6 & 0x3f {
        0b00_0000 | 0b00_0001 => I::MoveStack { by },
        0b00_0010 | 0b00_0011 => I::MoveStack { by: -by },
        0b00_1000 => I::ExtendSignedHalf { d, m },
        0b00_1001 => I::ExtendSignedByte { d, m },
        0b00_1010 => I::ExtendHalf { d, m },
        0b00_1011 => I::ExtendByte { d, m },
        0b01_0000..=0b01_0111 => I::Push { registers: low | (bits >> 8 & 1) << 14 },
        // CPSIE and CPSID: there are no interrupts.
        0b01_1001 => I::Nothing { halfwords: 1 },
        0b10_1000 => I::Reverse { d, m },
        0b10_1001 => I::ReverseHalves { d, m },
        0b10_1011 => I::ReverseSignedHalf { d, m },
        0b11_0000..=0b11_0111 => I::Pop { registers: low | (bits >> 8 & 1) << 15 },
        0b11_1000..=0b11_1011 => I::Breakpoint { code: low as u8 },
        // NOP, YIELD, WFE, WFI, SEV.
        0b11_1100..=0b11_1111 if low & 15 == 0 => I::Nothing { halfwords: 1 },
        _ => I::Undefined,
    }
}

/// An instruction of two halfwords: BL and the barriers; MSR and MRS are of no use without interrupts.
fn long(here: u32, first: u16, second: u16) -> Instruction {
    if first >> 11 == 0b11110 && second >> 14 == 0b11 && second >> 12 & 1 == 1 {
        let s = u32::from(first >> 10 & 1);
        let i = |bit: u16| !(u32::from(second >> bit & 1) ^ s) & 1;
        let halfwords =
            s << 23 | i(13) << 22 | i(11) << 21 | u32::from(first & 0x3ff) << 11 | u32::from(second & 0x7ff);
        return Instruction::BranchLink { to: target(here, signed(halfwords, 24)) };
    }
    let barrier = first == 0xf3bf && matches!(second & 0xfff0, 0x8f40 | 0x8f50 | 0x8f60);
    if barrier { Instruction::Nothing { halfwords: 2 } } else { Instruction::Undefined }
}

/// The lowest `width` bits as a signed number.
fn signed(bits: u32, width: u32) -> i32 {
    ((bits << (32 - width)) as i32) >> (32 - width)
}

/// So many halfwords from where PC seems to be, two ahead.
fn target(here: u32, halfwords: i32) -> u32 {
    here.wrapping_add(2).wrapping_add_signed(halfwords)
}
