//! Short text of bounded size: names in a plan, the firmware's version.

use serde::{Deserialize, Serialize};

/// UTF-8 text of at most `N` bytes without control characters, so that it can stand in a line of any log.
#[derive(Clone, Debug, Default, PartialEq, Eq, Serialize, Deserialize)]
#[serde(try_from = "heapless::String<N>", into = "heapless::String<N>")]
pub struct Text<const N: usize>(heapless::String<N>);

/// Why a text is refused.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum TextError {
    /// More than the field's number of bytes.
    TooLong,
    /// A line feed, a tab or another control character.
    ControlCharacter,
}

impl core::fmt::Display for TextError {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        f.write_str(match self {
            Self::TooLong => "the text is too long: shorten it",
            Self::ControlCharacter => "the text holds a control character: remove it",
        })
    }
}

impl core::error::Error for TextError {}

impl<const N: usize> Text<N> {
    /// Takes `text` whole or not at all.
    ///
    /// # Errors
    /// Over `N` bytes, or a control character in it.
    pub fn new(text: &str) -> Result<Self, TextError> {
        if text.chars().any(char::is_control) {
            return Err(TextError::ControlCharacter);
        }
        heapless::String::try_from(text).map(Self).map_err(|_| TextError::TooLong)
    }

    /// The text.
    #[must_use]
    pub fn as_str(&self) -> &str {
        &self.0
    }
}

impl<const N: usize> TryFrom<heapless::String<N>> for Text<N> {
    type Error = TextError;

    fn try_from(text: heapless::String<N>) -> Result<Self, TextError> {
        Self::new(&text)
    }
}

impl<const N: usize> From<Text<N>> for heapless::String<N> {
    fn from(text: Text<N>) -> Self {
        text.0
    }
}

impl<const N: usize> core::fmt::Display for Text<N> {
    fn fmt(&self, f: &mut core::fmt::Formatter<'_>) -> core::fmt::Result {
        f.write_str(&self.0)
    }
}
