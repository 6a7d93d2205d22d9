//! What the operator sees and presses.

use donelight_core::record::Millis;
use embedded_hal::digital::InputPin;

/// A contact counts as settled when it has not changed for this long, in milliseconds (common practice, no source).
const SETTLED_MS: u64 = 20;

/// A push-button that pulls its pin low, with its contact's bouncing taken out.
pub struct PushButton<P> {
    pin: P,
    /// The settled state: down or not.
    down: bool,
    /// What the pin showed last, and since when.
    seen: bool,
    since: Millis,
}

impl<P: InputPin> PushButton<P> {
    /// A button that is taken as not pressed until it has been seen released: one held down at the start does nothing.
    pub const fn new(pin: P) -> Self {
        Self { pin, down: true, seen: true, since: Millis(0) }
    }

    /// Looks at the pin; true once for each press. A pin that cannot be read is not pressed.
    pub fn pressed(&mut self, now: Millis) -> bool {
        let down = self.pin.is_low().unwrap_or(false);
        if down != self.seen {
            self.seen = down;
            self.since = now;
        }
        if self.seen == self.down || now.since(self.since) < SETTLED_MS {
            return false;
        }
        self.down = self.seen;
        self.down
    }
}

#[cfg(test)]
mod tests {
    use core::convert::Infallible;

    use embedded_hal::digital::ErrorType;

    use super::*;

    struct Level(bool);

    impl ErrorType for Level {
        type Error = Infallible;
    }

    impl InputPin for Level {
        fn is_high(&mut self) -> Result<bool, Infallible> {
            Ok(self.0)
        }
        fn is_low(&mut self) -> Result<bool, Infallible> {
            Ok(!self.0)
        }
    }

    /// How many presses a pin's levels mean, one level a tick of 5 ms.
    fn presses(levels: &str) -> usize {
        let mut button = PushButton::new(Level(true));
        let ticks = levels.chars().enumerate();
        ticks
            .filter(|(tick, level)| {
                button.pin.0 = *level == 'H';
                button.pressed(Millis(*tick as u64 * 5))
            })
            .count()
    }

    #[test]
    fn a_clean_press_counts_once_however_long_it_lasts() {
        assert_eq!(presses("HHHHHHHHLLLLLLLLHHHHHHHH"), 1);
        assert_eq!(presses("HHHHHHHHLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLLL"), 1);
    }

    #[test]
    fn a_bouncing_contact_counts_once() {
        assert_eq!(presses("HHHHHHHHLHLLHLLLLLLLLLHLHHLHHHHHHHHH"), 1);
    }

    #[test]
    fn a_disturbance_shorter_than_the_settling_time_is_no_press() {
        assert_eq!(presses("HHHHHHHHLLLHHHHHHHLHHHHHHHH"), 0);
    }

    #[test]
    fn a_button_held_while_the_station_starts_is_no_press_until_released_and_pressed_again() {
        assert_eq!(presses("LLLLLLLLLLLLLLLL"), 0);
        assert_eq!(presses("LLLLLLLLHHHHHHHHLLLLLLLL"), 1);
    }
}
