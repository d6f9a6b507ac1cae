//! Decimal numbers as sensors print them: finite, nothing else.
//!
//! `nan`, `inf`, hexadecimal, digit separators and overflow are rejected; the value is the nearest `f64` to the decimal.

/// Exact powers of ten: every one up to 10²² is an `f64`.
const POWERS: [f64; 23] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20,
    1e21, 1e22,
];
/// A whole number of up to this many digits is an exact `f64` (10¹⁵ < 2⁵³).
const EXACT_DIGITS: usize = 15;

/// The decimal that `text` begins with, and how many bytes it takes; `None` if it begins with none or is not finite.
///
/// *Input* ASCII bytes: sign, digits, a point, an exponent. *Output* the nearest `f64`. *Method* one exact division
/// where mantissa and power are exact (W. D. Clinger, "How to read floating point numbers accurately", 1990), else the
/// standard library. *Accuracy* correctly rounded, as the standard library's parser.
///
/// ```
/// use steadytap::stream::number::leading;
/// assert_eq!(leading(b"-102.55,8"), Some((-102.55, 7)));
/// assert_eq!(leading(b"nan"), None);
/// assert_eq!(leading(b"1e999"), None);
/// ```
#[inline]
pub fn leading(text: &[u8]) -> Option<(f64, usize)> {
    let negative = text.first() == Some(&b'-');
    let mut i = usize::from(negative || text.first() == Some(&b'+'));
    let start = i;
    let mut mantissa = 0u64;
    while let Some(digit) = digit_at(text, i) {
        mantissa = mantissa.wrapping_mul(10).wrapping_add(digit);
        i += 1;
    }
    let whole = i - start;
    let mut fraction = 0;
    if text.get(i) == Some(&b'.') {
        i += 1;
        while let Some(digit) = digit_at(text, i) {
            mantissa = mantissa.wrapping_mul(10).wrapping_add(digit);
            i += 1;
            fraction += 1;
        }
    }
    if whole + fraction == 0 {
        return None;
    }
    let exponent = matches!(text.get(i), Some(b'e' | b'E'));
    if whole + fraction <= EXACT_DIGITS && !exponent {
        let value = mantissa as f64 / POWERS[fraction];
        return Some((if negative { -value } else { value }, i));
    }
    with_exponent(text, i)
}

/// The slow road: an exponent, or more digits than are exact. `mantissa_end` is where digits and point end.
#[cold]
fn with_exponent(text: &[u8], mantissa_end: usize) -> Option<(f64, usize)> {
    let mut end = mantissa_end;
    if matches!(text.get(end), Some(b'e' | b'E')) {
        end += 1;
        end += usize::from(matches!(text.get(end), Some(b'+' | b'-')));
        let digits = end;
        while digit_at(text, end).is_some() {
            end += 1;
        }
        if end == digits {
            return None;
        }
    }
    let value: f64 = std::str::from_utf8(&text[..end]).ok()?.parse().ok()?;
    value.is_finite().then_some((value, end))
}

#[inline(always)]
fn digit_at(text: &[u8], i: usize) -> Option<u64> {
    let digit = text.get(i)?.wrapping_sub(b'0');
    (digit < 10).then_some(u64::from(digit))
}

/// The decimal that `text` is, whole; `None` if it is anything else.
pub fn whole(text: &[u8]) -> Option<f64> {
    leading(text).filter(|(_, used)| *used == text.len()).map(|(value, _)| value)
}
