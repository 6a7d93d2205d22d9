//! Mutations: valid bytes damaged in the ways that decoders are most likely to have forgotten.

use crate::random::Random;

/// Nothing longer is fed: no gauge line, frame or record comes near it, and no plan file either.
pub const INPUT_MAX: usize = 64 * 1024;

/// Where numbers end or begin to need another byte, in the widths that the formats have.
const EDGES: [u64; 18] = [
    0,
    1,
    0x7f,
    0x80,
    0xff,
    0x100,
    0x3fff,
    0x4000,
    0xffff,
    0x1_0000,
    0x7fff_ffff,
    0x8000_0000,
    0xffff_ffff,
    0x1_0000_0000,
    999_999_999_999,
    1_000_000_000_001,
    0x7fff_ffff_ffff_ffff,
    u64::MAX,
];

/// Numbers in digits, at the ends of what is taken and beyond.
const NUMBERS: [&[u8]; 20] = [
    b"0",
    b"-0",
    b"+1",
    b"1e9999",
    b"-1e-9999",
    b"nan",
    b"inf",
    b"0.0000000001",
    b"0.000000000000000000000000000001",
    b"255",
    b"256",
    b"65535",
    b"65536",
    b"4294967295",
    b"4294967296",
    b"1000000",
    b"1000001",
    b"1000000000000",
    b"9223372036854775808",
    b"99999999999999999999999999999999999999999",
];

/// `seed`, mutated once or a few times; `other` is spliced in at times, and `words` are put in.
pub(super) fn mutate(random: &mut Random, seed: &[u8], other: &[u8], words: &[&[u8]]) -> Vec<u8> {
    let mut bytes = seed.to_vec();
    for _ in 0..random.one(&[1, 1, 1, 2, 2, 3, 4, 6]) {
        once(random, &mut bytes, other, words);
    }
    bytes.truncate(INPUT_MAX);
    bytes
}

fn once(random: &mut Random, bytes: &mut Vec<u8>, other: &[u8], words: &[&[u8]]) {
    match random.below(14) {
        0 | 1 => at(random, bytes, |random, byte| *byte ^= 1 << random.below(8)),
        2 => at(random, bytes, |random, byte| *byte = random.bits() as u8),
        3 => at(random, bytes, |random, byte| *byte = random.one(&[0, 1, 0x7f, 0x80, 0xfe, 0xff])),
        4 => {
            let length = random.below(9) as usize;
            let new: Vec<u8> = (0..length).map(|_| random.bits() as u8).collect();
            put(random, bytes, &new);
        }
        5 => {
            let part = part(random, bytes.len());
            bytes.drain(part);
        }
        6 => bytes.truncate(random.below(bytes.len() as u64 + 1) as usize),
        7 => repeat(random, bytes),
        8 => {
            let new = other[part(random, other.len())].to_vec();
            put(random, bytes, &new);
        }
        9 => {
            // The front of one and the back of the other.
            bytes.truncate(random.below(bytes.len() as u64 + 1) as usize);
            bytes.extend_from_slice(&other[random.below(other.len() as u64 + 1) as usize..]);
        }
        10 => edge(random, bytes),
        11 => digits(random, bytes),
        _ if words.is_empty() => edge(random, bytes),
        _ => {
            let word = random.one(words);
            put(random, bytes, word);
        }
    }
}

fn at(random: &mut Random, bytes: &mut [u8], change: impl FnOnce(&mut Random, &mut u8)) {
    if !bytes.is_empty() {
        let place = random.below(bytes.len() as u64) as usize;
        change(random, &mut bytes[place]);
    }
}

/// Mostly a short one.
fn part(random: &mut Random, length: usize) -> std::ops::Range<usize> {
    let from = random.below(length as u64 + 1) as usize;
    let most = if random.chance(3, 4) { 16.min(length - from) } else { length - from };
    from..from + random.below(most as u64 + 1) as usize
}

/// Inserted, or in the place of as many bytes.
fn put(random: &mut Random, bytes: &mut Vec<u8>, new: &[u8]) {
    let from = random.below(bytes.len() as u64 + 1) as usize;
    let to = if random.chance(1, 2) { from } else { bytes.len().min(from + new.len()) };
    bytes.splice(from..to, new.iter().copied());
}

/// A part of it again: mostly a few times, at times until all is as long as can be.
fn repeat(random: &mut Random, bytes: &mut Vec<u8>) {
    let part = part(random, bytes.len());
    if part.is_empty() {
        return;
    }
    let most = if random.chance(1, 200) { INPUT_MAX / part.len() } else { 8 };
    let times = random.below(most as u64 + 1) as usize;
    let again = bytes[part.clone()].repeat(times);
    bytes.splice(part.end..part.end, again);
}

/// A number at an edge, in one of the ways that numbers are written in bytes.
fn edge(random: &mut Random, bytes: &mut Vec<u8>) {
    let mut number = random.one(&EDGES);
    let new = match random.below(4) {
        0 => {
            let mut variable = Vec::new();
            while number >= 0x80 {
                variable.push(number as u8 | 0x80);
                number >>= 7;
            }
            variable.push(number as u8);
            variable
        }
        1 => number.to_le_bytes()[..random.one(&[1, 2, 4, 8])].to_vec(),
        2 => number.to_be_bytes()[random.one(&[0, 4, 6, 7])..].to_vec(),
        _ => (f64::from_bits(number | 0x7ff0 << 48)).to_le_bytes().to_vec(),
    };
    put(random, bytes, &new);
}

/// Another number in the place of one in digits.
fn digits(random: &mut Random, bytes: &mut Vec<u8>) {
    let from = random.below(bytes.len() as u64 + 1) as usize;
    let Some(start) = bytes[from..].iter().position(u8::is_ascii_digit) else { return };
    let start = from + start;
    let length = bytes[start..].iter().take_while(|byte| byte.is_ascii_digit()).count();
    bytes.splice(start..start + length, random.one(&NUMBERS).iter().copied());
}
