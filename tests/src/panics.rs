//! Which panics the Pico's image can still run into: every call of a function that panics, found in the machine code, with
//! the source function that it stands in.
//!
//! What is not found: a panic that is reached by a pointer only. None of the functions that panic has its address taken in
//! the image but the panic handler itself, which `pico.rs` defines.

use std::borrow::Cow;
use std::collections::{BTreeMap, BTreeSet};

use addr2line::{Context, gimli};
use object::{Object, ObjectSection, ObjectSymbol, SymbolKind};

type Reader<'a> = gimli::EndianSlice<'a, gimli::LittleEndian>;

/// A call of a function that panics.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Site {
    /// The function called, such as `core::panicking::panic_bounds_check`.
    pub panic: String,
    /// The innermost function around it that is not of the language's own library.
    pub within: String,
    /// Where the call stands in the image.
    pub address: u64,
}

/// A function of the image: where it lies, and its name.
struct Function {
    begin: u64,
    end: u64,
    name: String,
}

/// Everything in the image that panics.
///
/// # Panics
/// If the bytes are no ELF file with debug information.
#[must_use]
pub fn sites(image: &[u8]) -> Vec<Site> {
    let file = object::File::parse(image).expect("an ELF file");
    let functions = functions(&file);
    let calls = calls(&file, &functions);
    let panicking = panicking(&functions, &calls);
    let sections = gimli::DwarfSections::load(|id| section(&file, id.name())).expect("debug information");
    let dwarf = sections.borrow(|bytes| Reader::new(bytes, gimli::LittleEndian));
    let context = Context::from_dwarf(dwarf).expect("debug information");
    let mut sites: Vec<Site> = calls
        .iter()
        .filter(|call| panicking.contains(&call.to) && !panicking.contains(&call.from))
        .map(|call| Site {
            panic: functions[call.to].name.clone(),
            within: within(&context, call.address).unwrap_or_else(|| functions[call.from].name.clone()),
            address: call.address,
        })
        .collect();
    sites.sort();
    sites
}

fn section<'a>(file: &object::File<'a>, name: &str) -> Result<Cow<'a, [u8]>, gimli::Error> {
    let found = file.section_by_name(name).and_then(|section| section.uncompressed_data().ok());
    Ok(found.unwrap_or_default())
}

fn functions(file: &object::File<'_>) -> Vec<Function> {
    let mut functions: Vec<Function> = file
        .symbols()
        .filter(|symbol| symbol.kind() == SymbolKind::Text && symbol.size() > 0)
        .map(|symbol| {
            // The lowest bit only says that it is Thumb code.
            let begin = symbol.address() & !1;
            let name = symbol.name().unwrap_or_default();
            Function { begin, end: begin + symbol.size(), name: demangled(name) }
        })
        .collect();
    functions.sort_by_key(|function| function.begin);
    functions.dedup_by_key(|function| function.begin);
    functions
}

fn demangled(name: &str) -> String {
    addr2line::demangle_auto(Cow::Borrowed(name), Some(gimli::DW_LANG_Rust)).into_owned()
}

/// A branch with link, between two functions by their places in the list.
struct Call {
    from: usize,
    to: usize,
    address: u64,
}

/// All calls by `bl`, the one way in which this processor's compiler calls a function that is known when linking.
fn calls(file: &object::File<'_>, functions: &[Function]) -> Vec<Call> {
    let by_begin: BTreeMap<u64, usize> =
        functions.iter().enumerate().map(|(index, function)| (function.begin, index)).collect();
    let marks = code_marks(file);
    let mut calls = Vec::new();
    for section in file.sections().filter(|section| section.kind() == object::SectionKind::Text) {
        let data = section.data().expect("code");
        let mut at = 0;
        while at + 2 <= data.len() {
            let address = section.address() + at as u64;
            let is_code = marks.range(..=address).next_back().is_none_or(|(_, code)| *code);
            let half =
                |at: usize| data.get(at..at + 2).map_or(0, |b| u32::from(u16::from_le_bytes([b[0], b[1]])));
            let (first, second) = (half(at), half(at + 2));
            let wide = is_code && first >> 11 >= 0b11101;
            let from = functions.partition_point(|function| function.begin <= address).checked_sub(1);
            if wide
                && let Some(target) = branch_with_link(first, second, address)
                && let (Some(from), Some(to)) = (from, by_begin.get(&target))
                && address < functions[from].end
            {
                calls.push(Call { from, to: *to, address });
            }
            at += if wide { 4 } else { 2 };
        }
    }
    calls
}

/// Where code (`true`) and data begin within sections: the symbols `$t` and `$d` of the Arm ABI (AAELF32, section 5.5.5,
/// from memory).
fn code_marks(file: &object::File<'_>) -> BTreeMap<u64, bool> {
    let marks = file.symbols().filter_map(|symbol| {
        let name = symbol.name().ok()?;
        let code = name.starts_with("$t");
        (code || name.starts_with("$d")).then_some((symbol.address(), code))
    });
    marks.collect()
}

/// The target of `BL`, encoding T1 (Armv6-M Architecture Reference Manual, A6.7.13, from memory).
fn branch_with_link(first: u32, second: u32, address: u64) -> Option<u64> {
    if first >> 11 != 0b11110 || second & 0xd000 != 0xd000 {
        return None;
    }
    let sign = first >> 10 & 1;
    let i1 = !((second >> 13 & 1) ^ sign) & 1;
    let i2 = !((second >> 11 & 1) ^ sign) & 1;
    let offset = sign << 24 | i1 << 23 | i2 << 22 | (first & 0x3ff) << 12 | (second & 0x7ff) << 1;
    // 25 bits with a sign.
    let offset = (offset << 7).cast_signed() >> 7;
    address.checked_add_signed(4 + i64::from(offset))
}

/// The functions that panic: the handler, and whatever of the language's own library or of the log's calls one that does.
fn panicking(functions: &[Function], calls: &[Call]) -> BTreeSet<usize> {
    let is_handler = |name: &str| name.ends_with("rust_begin_unwind") || name.contains("defmt_default_panic");
    let passes_on = |name: &str| name.starts_with("core::") || name.contains("_defmt_panic");
    let mut found: BTreeSet<usize> =
        (0..functions.len()).filter(|index| is_handler(&functions[*index].name)).collect();
    assert!(!found.is_empty(), "the image has a panic handler");
    loop {
        let more: Vec<usize> = calls
            .iter()
            .filter(|call| found.contains(&call.to) && passes_on(&functions[call.from].name))
            .map(|call| call.from)
            .filter(|from| !found.contains(from))
            .collect();
        if more.is_empty() {
            return found;
        }
        found.extend(more);
    }
}

/// The innermost function at this address whose source is not the language's own library.
fn within(context: &Context<Reader<'_>>, address: u64) -> Option<String> {
    let mut frames = context.find_frames(address).skip_all_loads().ok()?;
    while let Ok(Some(frame)) = frames.next() {
        let file = frame.location.as_ref().and_then(|location| location.file).unwrap_or_default();
        let name = frame.function.as_ref().and_then(|function| function.demangle().ok());
        if let Some(name) = name
            && !file.contains("/library/")
        {
            return Some(name.into_owned());
        }
    }
    None
}
