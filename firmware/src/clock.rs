//! Time as the station needs it: milliseconds since it started, and a pause.

use donelight_core::record::Millis;

/// A clock that starts with the station. Cheap to copy, since each loop has its own.
pub trait Clock: Copy {
    /// The time since the station started.
    fn now(&self) -> Millis;

    /// Comes back after this many milliseconds, not earlier.
    async fn pause(&self, milliseconds: u64);
}

#[cfg(test)]
pub(crate) mod testing {
    use super::*;

    /// A clock at 0 whose pauses never end.
    #[derive(Clone, Copy)]
    pub(crate) struct StillClock;

    impl Clock for StillClock {
        fn now(&self) -> Millis {
            Millis(0)
        }
        async fn pause(&self, _milliseconds: u64) {
            core::future::pending().await
        }
    }
}
