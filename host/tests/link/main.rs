//! Link and ledger: a station in memory, a faulty line to it, and ledgers in all states.

mod pulling;
mod support;
