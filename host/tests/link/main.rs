//! Link and ledger: a station in memory, a faulty line to it, and ledgers in all states.

mod backups;
mod chain;
#[cfg(unix)]
mod command;
mod faults;
mod faulty;
mod ledgers;
mod peers;
#[cfg(unix)]
mod ports;
mod pulling;
#[cfg(unix)]
mod resuming;
mod shared;
mod support;
#[cfg(unix)]
mod terminal;
mod times;
mod worn;
