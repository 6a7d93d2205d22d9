use std::format;
use std::string::{String, ToString};
use std::vec::Vec;

use num_bigint::BigInt;
use num_rational::BigRational;
use num_traits::Signed;
use proptest::prelude::*;

use super::*;
use crate::ratio::tests::assert_correctly_rounded;

fn decimal(text: &str) -> Decimal {
    text.parse().unwrap()
}

fn rational(mantissa: i64, decimals: u8) -> BigRational {
    BigRational::new(mantissa.into(), BigInt::from(10).pow(decimals.into()))
}

fn any_decimal() -> impl Strategy<Value = Decimal> {
    (-Decimal::MAX_MANTISSA..=Decimal::MAX_MANTISSA, 0_u32..=18, 0..=Decimal::MAX_DECIMALS).prop_map(
        |(mantissa, shorten, decimals)| Decimal::new(mantissa / 10_i64.pow(shorten), decimals).unwrap(),
    )
}

fn any_resolution() -> impl Strategy<Value = Resolution> {
    (1..=u16::MAX, 0_u32..=4, 0..=Resolution::MAX_DECIMALS).prop_map(|(step, shorten, decimals)| {
        Resolution::new((step / 10_u16.pow(shorten)).max(1), decimals).unwrap()
    })
}

/// A resolution and counts that its own readings can have.
fn any_reading() -> impl Strategy<Value = (Resolution, Counts)> {
    (any_resolution(), -Counts::MAX..=Counts::MAX, 0_u32..=12).prop_map(|(resolution, units, shorten)| {
        let counts = units / 10_i64.pow(shorten) / i64::from(resolution.step());
        (resolution, Counts::new(counts).unwrap())
    })
}

mod reading {
    use super::*;

    fn read(resolution: &str, text: &str) -> Result<i64, ReadingError> {
        resolution.parse::<Resolution>().unwrap().read(text.as_bytes(), "mm").map(Counts::get)
    }

    #[test]
    fn what_gauges_send_is_read() {
        for text in [
            "9.950",
            "+9.950",
            " 9.950\t",
            "+ 9.950",
            "+0009.95",
            "9,950",
            "9.950mm",
            "9.950 mm ",
            "9.95000000000",
        ] {
            assert_eq!(read("0.001", text), Ok(9950), "{text:?}");
        }
        assert_eq!(read("0.001", "-  0.5"), Ok(-500));
        assert_eq!(read("0.001", "5."), Ok(5000));
        assert_eq!(read("0.001", ".5"), Ok(500));
        assert_eq!(read("0.001", "-0.000"), Ok(0));
        assert_eq!(read("0.005", "9.985"), Ok(1997));
        assert_eq!(read("10", "9950"), Ok(995));
    }

    #[test]
    fn each_fault_has_its_own_error() {
        use ReadingError::*;
        for (text, error) in [
            ("", Empty),
            (" \t ", Empty),
            ("-", NoDigits),
            (" . mm", NoDigits),
            ("NaN", NoDigits),
            ("E", NoDigits),
            ("1e3", NotANumber),
            ("9.95.0", NotANumber),
            ("1,234.5", NotANumber),
            ("--1", NotANumber),
            ("9 950", NotANumber),
            ("x9.95", NotANumber),
            ("9.95\0", NotANumber),
            ("9.95 mm mm", NotANumber),
            ("9.9501", FinerThanResolution),
            ("0.00000000000000000000000000000000000001", FinerThanResolution),
            ("1000000000.001", OutOfRange),
            ("-99999999999999999999999999999999999999", OutOfRange),
            ("9.95 in", WrongUnit),
            ("9.95 MM", WrongUnit),
            ("9.95\"", WrongUnit),
            ("9.95 µm", NotAscii),
            ("é", NotAscii),
        ] {
            assert_eq!(read("0.001", text), Err(error), "{text:?}");
        }
        assert_eq!(read("0.005", "9.951"), Err(OffGrid));
        assert_eq!(read("10", "9951"), Err(OffGrid));
    }

    #[test]
    fn a_malformed_line_is_named_before_its_number_is_judged() {
        assert_eq!(read("0.001", "9.95012x3"), Err(ReadingError::NotANumber));
        assert_eq!(read("0.001", "99999999999999999999 in"), Err(ReadingError::WrongUnit));
    }

    #[test]
    fn the_largest_reading_is_read_and_the_next_refused() {
        assert_eq!(read("0.001", "1000000000.000"), Ok(Counts::MAX));
        assert_eq!(read("0.001", "-1000000000.000"), Ok(-Counts::MAX));
        assert_eq!(read("0.001", "-1000000000.001"), Err(ReadingError::OutOfRange));
        assert_eq!(read("10", "1000000000000"), Ok(100_000_000_000));
        assert_eq!(read("10", "1000000000010"), Err(ReadingError::OutOfRange));
    }

    #[test]
    fn zeros_beyond_all_counting_still_carry_nothing() {
        let zeros = "0".repeat(300);
        for count in 250..300 {
            let zeros = &zeros[..count];
            assert_eq!(read("0.001", &format!("{zeros}9.95{zeros}")), Ok(9950));
            assert_eq!(read("0.001", &format!("0.{zeros}1")), Err(ReadingError::FinerThanResolution));
        }
    }

    #[test]
    fn a_unit_beyond_ascii_or_none_at_all_is_fine() {
        let resolution: Resolution = "0.1".parse().unwrap();
        assert_eq!(resolution.read("12.5 µm".as_bytes(), "µm"), Ok(Counts(125)));
        assert_eq!(resolution.read(b"12.5", "\u{b5}m"), Ok(Counts(125)));
        assert_eq!(resolution.read(b"12.5", ""), Ok(Counts(125)));
        assert_eq!(resolution.read(b"12.5 mm", ""), Err(ReadingError::WrongUnit));
    }

    proptest! {
        #![proptest_config(ProptestConfig::with_cases(4000))]

        #[test]
        fn arbitrary_bytes_never_panic(
            text in proptest::collection::vec(any::<u8>(), 0..60), resolution in any_resolution(),
        ) {
            let _ = resolution.read(&text, "mm");
            let _ = Decimal::parse(&text);
        }

        #[test]
        fn nearly_numbers_never_panic(text in "[-+ \t.,0-9eEm]{0,60}", resolution in any_resolution()) {
            let _ = resolution.read(text.as_bytes(), "mm");
            let _ = Decimal::parse(&text);
        }

        #[test]
        fn what_is_shown_is_read_back((resolution, counts) in any_reading()) {
            let text = resolution.show(counts).to_string();
            prop_assert_eq!(resolution.read(text.as_bytes(), ""), Ok(counts));
        }

        #[test]
        fn dress_changes_no_reading(
            (resolution, counts) in any_reading(),
            before in "[ \t]{0,4}", between in "[ \t]{0,3}", after in "[ \t]{0,4}",
            zeros in 0_usize..40, more in 0_usize..40, comma: bool, plus: bool, unit in "(mm|)",
        ) {
            let plain = resolution.show(counts).to_string();
            let digits = plain.trim_start_matches('-');
            let sign = if counts.get() < 0 { "-" } else if plus { "+" } else { "" };
            let mut number = format!("{}{digits}", "0".repeat(zeros));
            if resolution.decimals() > 0 {
                number.push_str(&"0".repeat(more));
            }
            if comma {
                number = number.replace('.', ",");
            }
            let text = format!("{before}{sign}{between}{number}{between}{unit}{after}");
            prop_assert_eq!(resolution.read(text.as_bytes(), "mm"), Ok(counts));
        }

        #[test]
        fn a_well_formed_number_is_read_exactly_or_refused_for_its_value(
            negative: bool, whole in "[0-9]{1,16}", fraction in "[0-9]{0,12}", resolution in any_resolution(),
        ) {
            let text = format!("{}{whole}.{fraction}", if negative { "-" } else { "" });
            let digits: BigInt = format!("{whole}{fraction}").parse().unwrap();
            let digits = if negative { -digits } else { digits };
            let value = BigRational::new(digits, BigInt::from(10).pow(fraction.len().try_into().unwrap()));
            let units = value * rational(10_i64.pow(resolution.decimals().into()), 0);
            let counts = &units / rational(resolution.step().into(), 0);
            let expected = match resolution.read(text.as_bytes(), "") {
                Ok(read) => counts == rational(read.get(), 0),
                Err(ReadingError::FinerThanResolution) => !units.is_integer(),
                Err(ReadingError::OutOfRange) => units.abs() > rational(Counts::MAX, 0),
                Err(ReadingError::OffGrid) => units.is_integer() && !counts.is_integer(),
                Err(_) => false,
            };
            prop_assert!(expected, "{}", text);
        }
    }
}

#[test]
fn readings_are_shown_with_all_their_decimals() {
    let show = |resolution: &str, counts| {
        resolution.parse::<Resolution>().unwrap().show(Counts::new(counts).unwrap()).to_string()
    };
    assert_eq!(show("0.001", 9950), "9.950");
    assert_eq!(show("0.005", -1), "-0.005");
    assert_eq!(show("10", -995), "-9950");
    assert_eq!(show("65535", Counts::MAX), "65535000000000000");
}

#[test]
fn a_resolution_is_a_short_positive_number() {
    let parse = |text: &str| text.parse::<Resolution>();
    for text in ["0.001", "0.005", "10", "0.000000001", "0.65535", "25"] {
        assert_eq!(parse(text).unwrap().to_string(), text);
    }
    assert_eq!(parse("0.010"), Resolution::new(1, 2));
    assert_eq!(parse("0"), Err(ResolutionError::NotPositive));
    assert_eq!(parse("-0.1"), Err(ResolutionError::NotPositive));
    assert_eq!(parse("0.0000000001"), Err(ResolutionError::TooFine));
    assert_eq!(parse("0.65536"), Err(ResolutionError::TooManyDigits));
    assert_eq!(parse("fine"), Err(ResolutionError::Number(DecimalError::NoDigits)));
}

#[test]
fn a_decimal_is_written_as_it_was_read_without_needless_zeros() {
    for (text, written) in [
        ("9.95", "9.95"),
        ("-0,0500", "-0.05"),
        (" +007 ", "7"),
        ("0.000000000001", "0.000000000001"),
        ("-0", "0"),
        ("1000000.000000000000000", "1000000"),
        ("999999999999999999", "999999999999999999"),
    ] {
        assert_eq!(decimal(text).to_string(), written);
    }
}

#[test]
fn each_fault_of_a_decimal_has_its_own_error() {
    for (text, error) in [
        ("", DecimalError::Empty),
        ("  ", DecimalError::Empty),
        ("wide", DecimalError::NoDigits),
        ("1e3", DecimalError::NotANumber),
        ("1.2.3", DecimalError::NotANumber),
        ("9.95 mm", DecimalError::NotANumber),
        ("1000000000000000000", DecimalError::TooManyDigits),
        ("1234567.891234567891", DecimalError::TooManyDigits),
        ("0.0000000000001", DecimalError::TooManyDecimals),
    ] {
        assert_eq!(Decimal::parse(text), Err(error), "{text:?}");
    }
}

#[test]
fn stored_numbers_are_checked_and_have_one_form() {
    assert_eq!(Decimal::try_from((995, 2)), Ok(decimal("9.95")));
    assert_eq!(Decimal::try_from((9950, 3)), Err(DecimalError::NotNormalised));
    assert_eq!(Decimal::try_from((1, 13)), Err(DecimalError::TooManyDecimals));
    assert_eq!(Decimal::try_from((i64::MIN, 0)), Err(DecimalError::TooManyDigits));
    assert_eq!(Resolution::try_from((5, 3)), Resolution::new(5, 3));
    assert_eq!(Resolution::try_from((50, 4)), Err(ResolutionError::NotNormalised));
    assert_eq!(Resolution::try_from((0, 0)), Err(ResolutionError::NotPositive));
    assert_eq!(Resolution::try_from((1, 10)), Err(ResolutionError::TooFine));
    assert_eq!(Counts::try_from(Counts::MAX + 1), Err(OutOfRange));

    let mut buffer = [0; 32];
    let bytes = postcard::to_slice(&(1000_i64, 3_u8), &mut buffer).unwrap();
    assert!(postcard::from_bytes::<Decimal>(bytes).is_err());
    assert!(postcard::from_bytes::<Resolution>(bytes).is_err());
}

/// The bytes of stored readings name their error by position: a new order would change what old records say.
#[test]
fn reading_errors_keep_their_numbers() {
    use ReadingError::*;
    let all = [Empty, NoDigits, NotANumber, FinerThanResolution, OffGrid, OutOfRange, WrongUnit, NotAscii];
    for (number, error) in all.into_iter().enumerate() {
        let mut buffer = [0; 4];
        assert_eq!(postcard::to_slice(&error, &mut buffer).unwrap(), [u8::try_from(number).unwrap()]);
    }
    let messages: Vec<String> = all.iter().map(ToString::to_string).collect();
    for (index, message) in messages.iter().enumerate() {
        assert!(!messages[..index].contains(message), "{message}");
    }
}

proptest! {
    #[test]
    fn decimals_survive_text_and_bytes(number in any_decimal(), resolution in any_resolution()) {
        prop_assert_eq!(decimal(&number.to_string()), number);
        prop_assert_eq!(resolution.to_string().parse(), Ok(resolution));
        let mut buffer = [0; 32];
        let bytes = postcard::to_slice(&(number, resolution), &mut buffer).unwrap();
        prop_assert_eq!(postcard::from_bytes(bytes), Ok((number, resolution)));
    }

    #[test]
    fn decimals_are_ordered_as_the_numbers_are(a in any_decimal(), b in any_decimal()) {
        let exact = |number: Decimal| rational(number.mantissa(), number.decimals());
        prop_assert_eq!(a.cmp(&b), exact(a).cmp(&exact(b)));
    }

    #[test]
    fn decimals_and_their_differences_are_correctly_rounded(a in any_decimal(), b in any_decimal()) {
        let exact = |number: Decimal| rational(number.mantissa(), number.decimals());
        assert_correctly_rounded(&exact(a), a.to_f64());
        assert_correctly_rounded(&(exact(a) - exact(b)), a.minus(b));
        prop_assert_eq!(a.to_f64(), a.to_string().parse::<f64>().unwrap());
    }

    #[test]
    fn resolutions_are_correctly_rounded(resolution in any_resolution()) {
        prop_assert_eq!(resolution.to_f64(), resolution.to_string().parse::<f64>().unwrap());
    }
}
