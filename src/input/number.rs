//! Numbers from bytes: a fast path for the usual form, the exact library for the rest.

/// Powers of ten that are exact in f64.
const POWERS: [f64; 16] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15,
];

/// Whole tenths below 204.8, correctly rounded: most speeds are such, and a division costs more than all else of a row.
const TENTHS: [f64; 2048] = {
    let mut table = [0.0; 2048];
    let mut k = 0;
    while k < table.len() {
        table[k] = k as f64 / 10.0;
        k += 1;
    }
    table
};

/// Reads a decimal number; `None` if it is none, or not finite.
///
/// Up to 15 digits without exponent are one integer divided by one exact power of ten: correctly rounded (Clinger
/// 1990, How to read floating point numbers accurately). Anything else goes to `fast-float2`.
pub(crate) fn parse_number(text: &[u8]) -> Option<f64> {
    let (negative, digits) = match text {
        [b'-', rest @ ..] => (true, rest),
        _ => (false, text),
    };
    if digits.is_empty() || digits.len() > 16 {
        return parse_any(text);
    }
    let mut mantissa = 0_u64;
    let mut point = None;
    for (i, &byte) in digits.iter().enumerate() {
        match byte {
            b'0'..=b'9' => mantissa = mantissa * 10 + u64::from(byte - b'0'),
            b'.' if point.is_none() => point = Some(i),
            _ => return parse_any(text),
        }
    }
    let decimals = point.map_or(0, |p| digits.len() - 1 - p);
    let digit_count = digits.len() - usize::from(point.is_some());
    if digit_count == 0 || digit_count > 15 {
        return parse_any(text);
    }
    let value = mantissa as f64 / POWERS[decimals]; // decimals <= 15, checked above
    Some(if negative { -value } else { value })
}

/// Reads the short decimal number without a sign that a text begins with, the usual case, and its length; `None` sends
/// anything else to [`parse_number`].
///
/// Eight bytes are looked at as one word, without a branch on how many digits there are.
#[inline]
pub(crate) fn parse_short(text: &[u8]) -> Option<(f64, usize)> {
    const ONES: u64 = 0x0101_0101_0101_0101;
    let Some(bytes) = text.first_chunk::<8>() else {
        return parse_at_end(text);
    };
    // Digits become 0 to 9.
    let word = u64::from_le_bytes(*bytes) ^ (ONES * u64::from(b'0'));
    // The high bit of every byte that is no digit.
    let others = (((word & (ONES * 0x7f)) + ONES * 0x76) | word) & (ONES * 0x80);
    let whole = others.trailing_zeros() / 8;
    let (digits, count, decimals, length) = if bytes.get(whole as usize) == Some(&b'.') {
        // The next byte that is no digit ends the number.
        let length = (others & (others - 1)).trailing_zeros() / 8;
        let low = word & ((1 << (8 * whole)) - 1);
        // Two shifts: the point may be the last byte.
        let high = (word >> (8 * whole) >> 8) << (8 * whole);
        (low | high, length - 1, length - 1 - whole, length)
    } else {
        (word, whole, 0, whole)
    };
    if length > 7 || count == 0 {
        // Longer than the word, or no number.
        return if length > 7 { parse_at_end(text) } else { None };
    }
    // To the end of the word, with zeros before them.
    let digits = digits << (8 * (8 - count));
    let pairs = (digits * 10 + (digits >> 8)) & 0x00ff_00ff_00ff_00ff;
    let fours = (pairs * 100 + (pairs >> 16)) & 0x0000_ffff_0000_ffff;
    let mantissa = (fours * 10_000 + (fours >> 32)) & 0xffff_ffff;
    let number = value_of(mantissa as u32, decimals as usize)?;
    Some((number, length as usize))
}

/// The number of a mantissa of few digits.
#[inline]
fn value_of(mantissa: u32, decimals: usize) -> Option<f64> {
    match decimals {
        0 => Some(f64::from(mantissa)),
        1 if (mantissa as usize) < TENTHS.len() => TENTHS.get(mantissa as usize).copied(),
        _ => Some(f64::from(mantissa) / POWERS.get(decimals)?),
    }
}

/// The same byte by byte, where fewer than eight are left or the number has as many.
fn parse_at_end(text: &[u8]) -> Option<(f64, usize)> {
    let mut mantissa = 0_u32;
    let (mut length, mut decimals, mut after_point) = (0, 0, 0);
    for &byte in text {
        let digit = byte.wrapping_sub(b'0');
        if digit < 10 {
            mantissa = mantissa * 10 + u32::from(digit);
            decimals += after_point;
        } else if byte == b'.' && after_point == 0 {
            after_point = 1;
        } else {
            break;
        }
        length += 1;
        // More digits than these are for the general way, and would not fit.
        if length > 8 {
            return None;
        }
    }
    // A point alone is no number.
    if length <= after_point {
        return None;
    }
    Some((value_of(mantissa, decimals)?, length))
}

fn parse_any(text: &[u8]) -> Option<f64> {
    let value: f64 = fast_float2::parse(text).ok()?;
    value.is_finite().then_some(value)
}

/// The same with a decimal comma.
pub(crate) fn parse_number_with_comma(text: &[u8]) -> Option<f64> {
    // Longer than any number worth reading.
    let mut buffer = [0_u8; 48];
    let copy = buffer.get_mut(..text.len())?;
    copy.copy_from_slice(text);
    for byte in copy.iter_mut() {
        match *byte {
            b',' => *byte = b'.',
            b'.' => return None,
            _ => {}
        }
    }
    parse_number(copy)
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    proptest! {
        #[test]
        fn numbers_equal_the_standard_library(text in "-?[0-9]{0,12}(\\.[0-9]{0,6})?(e-?[0-9]{1,2})?") {
            let expected = text.parse::<f64>().ok().filter(|x| x.is_finite());
            prop_assert_eq!(parse_number(text.as_bytes()), expected);
            if let Some((short, length)) = parse_short(text.as_bytes())
                && length == text.len()
            {
                prop_assert_eq!(Some(short), expected);
            }
        }
    }

    proptest! {
        #[test]
        fn a_word_at_once_is_as_byte_by_byte(text in "[0-9]{0,9}(\\.[0-9]{0,6})?[-,;. e\n]?", rest in "[0-9a-z.,]{8}") {
            let whole = text.clone() + &rest;
            prop_assert_eq!(parse_short(whole.as_bytes()), parse_at_end(whole.as_bytes()));
            prop_assert_eq!(parse_short(text.as_bytes()), parse_at_end(text.as_bytes()));
        }
    }

    #[test]
    fn odd_numbers_are_read_exactly_or_refused() {
        assert_eq!(parse_number(b"8.89999"), Some(8.89999));
        assert_eq!(
            parse_number(b"1.7000000000000002"),
            Some(1.700_000_000_000_000_2)
        );
        assert_eq!(parse_number(b"-0.5"), Some(-0.5));
        for bad in [
            "", "-", ".", "1.2.3", "12,5", "nan", "inf", "1e400", "0x10", "5 ",
        ] {
            assert_eq!(parse_number(bad.as_bytes()), None, "{bad}");
        }
    }

    #[test]
    fn a_decimal_comma_is_a_point_and_a_point_is_none() {
        assert_eq!(parse_number_with_comma(b"12,5"), Some(12.5));
        assert_eq!(parse_number_with_comma(b"-3"), Some(-3.0));
        assert_eq!(parse_number_with_comma(b"12.5"), None);
        assert_eq!(parse_number_with_comma(b"1,2,3"), None);
    }
}
