//! The station's buttons on the keyboard: a line on standard input presses one.

use std::io::{self, Stdin};
use std::os::fd::{AsFd, BorrowedFd};

use donelight_core::recorder::Button;

/// Longer lines name no button.
const LINE_MAX: usize = 64;

/// What a line asks for.
#[derive(Clone, Debug, PartialEq, Eq)]
pub enum Key {
    /// Press this.
    Button(Button),
    /// It names no button.
    Unknown(String),
}

/// Standard input, read only where that cannot stop the process.
#[derive(Debug)]
pub struct Keyboard {
    input: Stdin,
    line: Vec<u8>,
}

impl Default for Keyboard {
    fn default() -> Self {
        Self { input: io::stdin(), line: Vec::new() }
    }
}

impl Keyboard {
    /// Whether it may be read now: a process in a terminal's background would be stopped by the system.
    #[must_use]
    pub fn is_ours(&self) -> bool {
        !rustix::termios::isatty(&self.input)
            || rustix::termios::tcgetpgrp(&self.input).is_ok_and(|group| group == rustix::process::getpgrp())
    }

    /// Takes what is there, once it was found ready; `None` from its end on.
    pub fn read(&mut self) -> Option<Vec<Key>> {
        let mut bytes = [0; 256];
        match rustix::io::read(&self.input, &mut bytes) {
            Ok(0) => None,
            Ok(read) => Some(self.take(bytes.get(..read).unwrap_or_default())),
            Err(rustix::io::Errno::INTR | rustix::io::Errno::AGAIN) => Some(Vec::new()),
            Err(_) => None,
        }
    }

    fn take(&mut self, bytes: &[u8]) -> Vec<Key> {
        let mut keys = Vec::new();
        for byte in bytes {
            if *byte != b'\n' {
                // One byte too many marks the line as too long.
                if self.line.len() <= LINE_MAX {
                    self.line.push(*byte);
                }
                continue;
            }
            let line = String::from_utf8_lossy(&self.line);
            keys.extend(key(line.trim()));
            self.line.clear();
        }
        keys
    }
}

impl AsFd for Keyboard {
    fn as_fd(&self) -> BorrowedFd<'_> {
        self.input.as_fd()
    }
}

fn key(line: &str) -> Option<Key> {
    match line {
        "" => None,
        "take back" => Some(Key::Button(Button::TakeBack)),
        "seen" => Some(Key::Button(Button::Seen)),
        other => Some(Key::Unknown(other.chars().take(LINE_MAX).collect())),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_press_buttons_whatever_pieces_they_come_in() {
        let mut keyboard = Keyboard::default();
        assert_eq!(keyboard.take(b"take ba"), []);
        assert_eq!(keyboard.take(b"ck\r\n\n see"), [Key::Button(Button::TakeBack)]);
        assert_eq!(keyboard.take(b"n \nhelp\n"), [Key::Button(Button::Seen), Key::Unknown("help".into())]);
    }

    #[test]
    fn an_endless_line_is_bounded_and_names_no_button() {
        let mut keyboard = Keyboard::default();
        assert_eq!(keyboard.take(&[b'x'; 100_000]), []);
        assert_eq!(keyboard.line.len(), LINE_MAX + 1);
        assert!(matches!(&keyboard.take(b"\n")[..], [Key::Unknown(_)]));
        assert_eq!(keyboard.take(b"seen\n"), [Key::Button(Button::Seen)]);
    }
}
