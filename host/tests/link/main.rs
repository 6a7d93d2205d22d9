//! Link and ledger: a station in memory, a faulty line to it, and ledgers in all states.

mod faults;
mod faulty;
mod ledgers;
mod pulling;
mod support;
