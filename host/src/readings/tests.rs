use super::*;

fn read(text: &str, column: Option<&str>) -> Result<(Vec<i64>, Option<String>), FileError> {
    let resolution: Resolution = "0.001".parse().unwrap();
    found(text.as_bytes(), &Columns { readings: column, subgroups: None }, resolution, "mm")
        .map(|(readings, title, _)| (readings.into_iter().map(Counts::get).collect(), title))
}

fn lines_of_bad_rows(text: &str) -> Vec<usize> {
    match read(text, None) {
        Err(FileError::BadRows { shown, .. }) => shown.into_iter().map(|row| row.line).collect(),
        other => panic!("{other:?}"),
    }
}

#[test]
fn the_same_readings_in_any_layout_are_the_same() {
    let wanted = vec![1999, 2001, -3];
    for text in [
        "1.999\n2.001\n-0.003\n",
        "1.999\r\n2.001\r\n-0.003",
        "# made up\ny\n1.999\n\n# in between\n2.001\n   \n-0.003\n\n",
        "\u{feff}thickness\n1.999 mm\n2.001mm\n-0.003\n",
        "piece;thickness\na;1,999\nb;2,001\nc;-0,003\n",
        "piece\tthickness\na\t1.999\nb\t2.001\nc\t-0.003\n",
        "piece,thickness\na,\"1,999\"\nb,\"2,001\"\nc,\"-0,003\"\n",
        "2026-01-05 07:10;1,999\n2026-01-05 07:11;2,001\n2026-01-05 07:12;-0,003\n",
        "\"1.999\"\n\"2.001\"\n\"-0.003\"\n",
        "  1.9990\n  2.001\n -.003\n",
    ] {
        assert_eq!(read(text, None).unwrap_or_else(|e| panic!("{text}: {e}")).0, wanted, "{text}");
    }
}

#[test]
fn a_bad_row_is_named_by_the_line_that_an_editor_shows() {
    assert_eq!(lines_of_bad_rows("# one\n\ny\n1.999\n\n# six\nrubbish1\n2.0005\n2.001\n"), [7, 8]);
    assert_eq!(lines_of_bad_rows("y\r\n1.999\r\n\r\n2.0x\r\n# five\r\n2.001\r\n3,\r\n4.0y"), [4, 7, 8]);
    assert_eq!(lines_of_bad_rows("a,b\nx,1.9\nx,\nx,1.8\nx,1.7,1\nx\n"), [3, 5, 6]);
    assert_eq!(lines_of_bad_rows("\"two\nlines\",b\nx,1.9\nx,?\nx,1.8\n"), [4]);
}

#[test]
fn all_bad_rows_are_counted_and_twenty_are_shown() {
    let text = format!("y\n1.0\n{}", "2.00001\n".repeat(33));
    let Err(error @ FileError::BadRows { count: 33, .. }) = read(&text, None) else { panic!() };
    let message = error.to_string();
    assert_eq!(message.lines().filter(|line| line.contains("2.00001")).count(), 20);
    assert!(message.ends_with("… and 13 more"), "{message}");
}

#[test]
fn a_column_is_never_guessed() {
    let text = "nr,temperature,thickness\n1,20.1,1.999\n2,20.2,2.001\n";
    let Err(FileError::WhichColumn { columns }) = read(text, None) else { panic!() };
    assert_eq!(columns, ["1 \"nr\"", "2 \"temperature\"", "3 \"thickness\""]);
    assert_eq!(read(text, Some("Thickness")).unwrap(), (vec![1999, 2001], Some("thickness".to_owned())));
    assert_eq!(read(text, Some("3")).unwrap().0, [1999, 2001]);
    assert!(matches!(read(text, Some("4")), Err(FileError::NoSuchColumn { .. })));
    assert!(matches!(read(text, Some("width")), Err(FileError::NoSuchColumn { .. })));
    assert!(matches!(read("a,A\n1,2\n", Some("a")), Err(FileError::TitleTwice { .. })));
    // One cell with letters does not make another column the only one with numbers.
    assert!(matches!(read("1,1.999\n2,2x\n3,2.001\n", None), Err(FileError::WhichColumn { .. })));
}

#[test]
fn decimal_commas_between_commas_are_not_taken_for_columns() {
    assert!(matches!(read("1,999\n2,001\n", None), Err(FileError::DecimalCommas)));
    assert_eq!(read("1,999\n2,001\n", Some("2")).unwrap().0, [999_000, 1000]);
    assert!(matches!(read("y\n1,999\n2,001\n", None), Err(FileError::BadRows { count: 2, .. })));
}

#[test]
fn files_without_readings_say_so() {
    for text in ["", "\n\n", "# only comments\n", "y\n", "title;other\n"] {
        assert!(matches!(read(text, None), Err(FileError::NoRows)), "{text:?}");
    }
    assert!(matches!(read("a,b\nc,d\n", None), Err(FileError::NoNumbers)));
    assert!(matches!(read("1\0.\0", None), Err(FileError::NotText)));
}

#[test]
fn the_fingerprint_is_sha_256() {
    // FIPS 180-2, appendix B.1: the digest of "abc".
    assert_eq!(fingerprint(b"abc"), "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad");
}

fn subgroups(text: &str) -> Result<u32, (usize, SubgroupFault)> {
    let columns = Columns { readings: None, subgroups: Some("1") };
    match found(text.as_bytes(), &columns, "0.1".parse().unwrap(), "") {
        Ok((_, _, size)) => Ok(size.unwrap().get()),
        Err(FileError::Subgroups { line, fault }) => Err((line, fault)),
        Err(other) => panic!("{other:?}"),
    }
}

#[test]
fn subgroups_are_neighbouring_rows_of_one_name_and_the_last_may_be_incomplete() {
    assert_eq!(subgroups("1,5.1\n1,5.2\n2,5.3\n2,5.4\n"), Ok(2));
    assert_eq!(subgroups("shift,y\nearly,5.1\nearly,5.2\nearly,5.3\n# noon\nlate,5.4\n"), Ok(3));
}

#[test]
fn rows_that_make_no_subgroups_of_one_size_are_named_by_their_line() {
    let name = |name: &str| name.to_owned();
    assert_eq!(subgroups("1,5.1\n1,5.2\n,5.3\n"), Err((3, SubgroupFault::Blank)));
    assert_eq!(
        subgroups("a,5.1\na,5.2\nb,5.3\nb,5.4\na,5.5\n"),
        Err((5, SubgroupFault::Scattered { name: name("a") }))
    );
    assert_eq!(
        subgroups("g,y\n1,5.1\n1,5.2\n2,5.3\n3,5.4\n"),
        Err((4, SubgroupFault::Uneven { name: name("2"), pieces: 1, first: 2 }))
    );
    assert_eq!(
        subgroups("1,5.1\n1,5.2\n2,5.3\n2,5.4\n2,5.5\n"),
        Err((3, SubgroupFault::Uneven { name: name("2"), pieces: 3, first: 2 }))
    );
    assert_eq!(subgroups("1,5.1\n2,5.2\n3,5.3\n"), Err((1, SubgroupFault::Size { pieces: 1 })));
    assert_eq!(subgroups(&"1,5.1\n".repeat(26)), Err((1, SubgroupFault::Size { pieces: 26 })));
}
