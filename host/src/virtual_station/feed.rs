//! A file of gauge lines, sent as they are.

use std::fs::File;
use std::io::{self, BufRead, BufReader, Read};
use std::path::{Path, PathBuf};

use crate::output::Explain;

/// What has no line end by then is sent in pieces.
const PIECE: u64 = 4096;

/// The feed's file cannot be read.
#[derive(Debug, thiserror::Error)]
#[error("{}: {cause}", path.display())]
pub struct FeedError {
    path: PathBuf,
    cause: io::Error,
}

impl Explain for FeedError {
    fn kind(&self) -> &'static str {
        "feed-file"
    }

    fn help(&self) -> String {
        "Give a file with one gauge line a line.".to_owned()
    }
}

/// The file and where it is sent from next.
#[derive(Debug)]
pub struct Feed {
    path: PathBuf,
    file: BufReader<File>,
}

impl Feed {
    /// Opens the file at its beginning.
    ///
    /// # Errors
    /// It is not there, or is not to be read.
    pub fn open(path: &Path) -> Result<Self, FeedError> {
        let broken = |cause| FeedError { path: path.to_owned(), cause };
        let mut file = BufReader::new(File::open(path).map_err(broken)?);
        // A folder opens like a file and shows only here that it is none.
        file.fill_buf().map_err(broken)?;
        Ok(Self { path: path.to_owned(), file })
    }

    /// The next line with its end (CR, LF or both), byte by byte as it stands in the file; empty at the file's end.
    ///
    /// # Errors
    /// The file can no longer be read.
    pub fn next_line(&mut self) -> Result<Vec<u8>, FeedError> {
        self.read_line().map_err(|cause| FeedError { path: self.path.clone(), cause })
    }

    fn read_line(&mut self) -> io::Result<Vec<u8>> {
        let mut line = Vec::new();
        self.file.by_ref().take(PIECE).read_until(b'\n', &mut line)?;
        // Of a file with CR alone, all but the first line goes back.
        let carriage = line.iter().position(|byte| *byte == b'\r').map(|at| at + 1);
        if let Some(end) = carriage.filter(|end| line.get(*end).is_some_and(|next| *next != b'\n')) {
            let back = line.len() - end;
            line.truncate(end);
            self.file.seek_relative(-i64::try_from(back).unwrap_or(i64::MAX))?;
        }
        Ok(line)
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn lines(content: &[u8]) -> Vec<Vec<u8>> {
        let file = tempfile::NamedTempFile::new().unwrap();
        std::fs::write(file.path(), content).unwrap();
        let mut feed = Feed::open(file.path()).unwrap();
        std::iter::from_fn(|| Some(feed.next_line().unwrap()).filter(|line| !line.is_empty())).collect()
    }

    #[test]
    fn a_line_ends_with_cr_lf_or_both_and_the_last_one_may_have_no_end() {
        assert_eq!(
            lines(b"1.0\r\n2.0\n3.0\r4.0\r\r\n5"),
            [&b"1.0\r\n"[..], b"2.0\n", b"3.0\r", b"4.0\r", b"\r\n", b"5"]
        );
    }

    #[test]
    fn a_feed_that_is_missing_or_a_folder_is_an_error_that_names_it() {
        let folder = tempfile::tempdir().unwrap();
        let missing = Feed::open(&folder.path().join("none.txt")).unwrap_err();
        assert!(missing.to_string().contains("none.txt"), "{missing}");
        assert!(Feed::open(folder.path()).is_err());
    }

    proptest! {
        #![proptest_config(ProptestConfig { cases: 64, ..ProptestConfig::default() })]

        #[test]
        fn whatever_is_in_the_file_is_sent_byte_by_byte_in_order(
            parts in proptest::collection::vec(
                prop_oneof![
                    Just(b"\r".to_vec()),
                    Just(b"\n".to_vec()),
                    Just(vec![b'x'; 5_000]),
                    proptest::collection::vec(any::<u8>(), 0..20),
                ],
                0..40,
            ),
        ) {
            let content = parts.concat();
            let lines = lines(&content);
            prop_assert!(lines.iter().all(|line| line.len() as u64 <= PIECE));
            prop_assert_eq!(lines.concat(), content);
        }
    }
}
