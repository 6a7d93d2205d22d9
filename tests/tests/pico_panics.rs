//! No panic in the Pico's image that is not explained: see `panics.toml`.
//!
//! This needs the image: `tests/run` builds it and runs it.

use std::collections::BTreeMap;

use donelight_tests::emulator::image;
use donelight_tests::panics::{Site, sites};
use serde::Deserialize;

/// The panics that remain, each with the reason why it cannot be reached, or not from outside.
const ALLOWED: &str = include_str!("../panics.toml");

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct List {
    allowed: Vec<Allowed>,
}

#[derive(Deserialize)]
#[serde(deny_unknown_fields)]
struct Allowed {
    /// What the function's name begins with; several may share a reason.
    within: Vec<String>,
    /// The end of the name of the panic's own function; all of them if it is left out.
    panic: Option<String>,
    /// Why.
    why: String,
}

impl Allowed {
    fn explains(&self, site: &Site) -> bool {
        self.within.iter().any(|begin| site.within.starts_with(begin.as_str()))
            && self.panic.as_ref().is_none_or(|end| site.panic.ends_with(end.as_str()))
    }
}

#[test]
#[ignore = "needs the Pico image: run tests/run"]
fn every_panic_that_is_left_in_the_image_is_explained_and_every_explanation_needed() {
    let image = std::fs::read(image::path()).unwrap();
    let list: List = toml::from_str(ALLOWED).unwrap();
    assert!(list.allowed.iter().all(|allowed| allowed.why.len() > 30), "reasons, not words");
    let sites = sites(&image);
    assert!(sites.len() > 20, "the search itself works: {sites:#?}");

    let mut unexplained: BTreeMap<(&str, &str), usize> = BTreeMap::new();
    let mut needed = vec![false; list.allowed.len()];
    for site in &sites {
        match list.allowed.iter().position(|allowed| allowed.explains(site)) {
            Some(index) => needed[index] = true,
            None => *unexplained.entry((site.within.as_str(), site.panic.as_str())).or_default() += 1,
        }
    }
    println!("{} calls of functions that panic are in the image", sites.len());
    assert!(unexplained.is_empty(), "new panics in the image, with their number: {unexplained:#?}");
    let unneeded: Vec<_> = list.allowed.iter().zip(&needed).filter(|(_, needed)| !**needed).collect();
    let unneeded: Vec<_> = unneeded.iter().map(|(allowed, _)| &allowed.within).collect();
    assert!(unneeded.is_empty(), "no longer in the image: {unneeded:?}");
}
