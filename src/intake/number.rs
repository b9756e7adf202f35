//! Decimal numbers as texts.

/// Why a text is no number.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(super) enum NumberFault {
    /// Not an optional sign, digits with at most one decimal point, and an optional exponent.
    Syntax,
    /// Beyond the largest double.
    Range,
}

/// Largest integer below which every integer is a double.
const EXACT: u64 = 1 << 53;
/// Powers of ten that are doubles without rounding.
const POWERS: [f64; 23] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16,
    1e17, 1e18, 1e19, 1e20, 1e21, 1e22,
];

/// The double nearest to `text × 10^shift`; −0 comes back as 0.
///
/// The shift moves the decimal exponent before the one rounding, so that `123.4` with shift 6 is
/// exactly what `123400000` is. Where mantissa and power are both exact doubles one multiplication
/// or division rounds once, hence correctly (Clinger 1990, "How to read floating point numbers
/// accurately", PLDI); all else goes through the standard library.
pub(super) fn parse(text: &str, shift: i32, scratch: &mut String) -> Result<f64, NumberFault> {
    let bytes = text.as_bytes();
    let negative = bytes.first() == Some(&b'-');
    let mut i = usize::from(negative || bytes.first() == Some(&b'+'));
    let (mut mantissa, mut exponent, mut whole) = (0_u64, 0_i32, true);
    let start = i;
    let mut points = 0;
    while let Some(&b) = bytes.get(i) {
        if b.is_ascii_digit() {
            // Below 10^18 another digit still fits.
            if mantissa < 1_000_000_000_000_000_000 {
                mantissa = mantissa * 10 + u64::from(b - b'0');
                exponent -= points;
            } else {
                whole = false;
            }
        } else if b == b'.' && points == 0 {
            points = 1;
        } else {
            break;
        }
        i += 1;
    }
    if i - start <= usize::from(points == 1) {
        return Err(NumberFault::Syntax);
    }
    let digits = &text[..i];
    let mut stated = 0_i32;
    if matches!(bytes.get(i), Some(b'e' | b'E')) {
        i += 1;
        let below = bytes.get(i) == Some(&b'-');
        i += usize::from(below || bytes.get(i) == Some(&b'+'));
        let first = i;
        while let Some(b) = bytes.get(i).filter(|b| b.is_ascii_digit()) {
            stated = (stated * 10 + i32::from(b - b'0')).min(100_000);
            i += 1;
        }
        if i == first {
            return Err(NumberFault::Syntax);
        }
        stated = if below { -stated } else { stated };
    }
    if i != bytes.len() {
        return Err(NumberFault::Syntax);
    }
    let power = exponent + stated + shift;
    if whole && mantissa <= EXACT && power.unsigned_abs() <= 22 {
        let factor = POWERS[power.unsigned_abs() as usize];
        let size = mantissa as f64;
        let size = if power < 0 {
            size / factor
        } else {
            size * factor
        };
        return Ok(if negative && mantissa > 0 {
            -size
        } else {
            size
        });
    }
    let value = if shift == 0 {
        text.parse::<f64>()
    } else {
        use std::fmt::Write as _;
        scratch.clear();
        // Writing to a string cannot fail.
        let _ = write!(scratch, "{digits}e{}", stated + shift);
        scratch.parse::<f64>()
    }
    .map_err(|_| NumberFault::Syntax)?;
    if value.is_finite() {
        Ok(value + 0.0)
    } else {
        Err(NumberFault::Range)
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn read(text: &str, shift: i32) -> Result<f64, NumberFault> {
        parse(text, shift, &mut String::new())
    }

    proptest! {
        /// The standard library's correctly rounded reading is the oracle.
        #[test]
        fn equals_the_correctly_rounded_reading(
            text in "[+-]?[0-9]{1,25}(\\.[0-9]{0,25})?([eE][+-]?[0-9]{1,2})?",
            shift in -9..=15_i32,
        ) {
            let (digits, exponent) = match text.to_lowercase().split_once('e') {
                Some((d, e)) => (d.to_owned(), e.parse::<i32>().unwrap()),
                None => (text.clone(), 0),
            };
            let expected: f64 = format!("{digits}e{}", exponent + shift).parse().unwrap();
            prop_assert_eq!(read(&text, shift).unwrap().to_bits(), (expected + 0.0).to_bits());
        }

        #[test]
        fn accepts_only_what_the_standard_library_accepts(text in "[0-9eE.+-]{0,8}") {
            prop_assert_eq!(read(&text, 0).ok(), text.parse::<f64>().ok().map(|v| v + 0.0)
                .filter(|v| v.is_finite()));
        }
    }

    #[test]
    fn the_multiplier_shifts_the_text() {
        assert_eq!(
            read("123.4", 6).unwrap().to_bits(),
            123_400_000_f64.to_bits()
        );
        assert_eq!(read("0.1", 1).unwrap().to_bits(), 1_f64.to_bits());
        assert_eq!(read("2.5", -2).unwrap().to_bits(), 0.025_f64.to_bits());
        assert_eq!(read("-0", 0).unwrap().to_bits(), 0_f64.to_bits());
    }

    #[test]
    fn refuses_what_is_no_decimal_number() {
        for text in [
            "",
            "-",
            ".",
            "1,5",
            "1.234.5",
            "1 000",
            "inf",
            "-Infinity",
            "nan",
            "NaN",
            "0x10",
            "1e",
            "1e+",
            "1_000",
            "--1",
            "1f",
        ] {
            assert_eq!(read(text, 0), Err(NumberFault::Syntax), "{text}");
        }
        assert_eq!(read("1e309", 0), Err(NumberFault::Range));
        assert_eq!(read("1e300", 15), Err(NumberFault::Range));
        assert_eq!(read("9e99999999999", 3), Err(NumberFault::Range));
    }
}
