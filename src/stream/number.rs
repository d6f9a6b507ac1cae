//! Decimal numbers as sensors print them: finite, nothing else.
//!
//! `nan`, `inf`, hexadecimal, digit separators and overflow are rejected; the value is the nearest `f64` to the decimal.

use crate::units::eight::Eight;

/// Exact powers of ten: every one up to 10²² is an `f64`.
const POWERS: [f64; 23] = [
    1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20,
    1e21, 1e22,
];
/// Powers of ten for numbers above and below 0.
const SIGNED_POWERS: [[f64; 8]; 2] =
    [[1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7], [-1e0, -1e1, -1e2, -1e3, -1e4, -1e5, -1e6, -1e7]];
/// 2⁵²: from here to 2⁵³ an `f64` has just the whole numbers.
const TWO_52: f64 = 4_503_599_627_370_496.0;
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
    let ends = |used: usize| text.get(used).is_none_or(|c| !matches!(c, b'0'..=b'9' | b'.' | b'e' | b'E'));
    short(text).filter(|(_, used)| ends(*used)).or_else(|| long(text))
}

/// The decimal that a field begins with, and what stands behind it: a comma, or nothing. `None` is any other field, right or wrong.
#[inline(always)]
pub fn before_comma(text: &[u8]) -> Option<(f64, &[u8])> {
    if let Some((value, used)) = short(text)
        && let Some(behind) = text.get(used..)
        && behind.first().is_none_or(|c| *c == b',')
    {
        return Some((value, behind));
    }
    let (value, used) = long(text)?;
    Some((value, &text[used..]))
}

/// A decimal of up to eight characters, as sensors print them, without plus sign and exponent. It is the whole number only if
/// what stands behind it cannot go on with it. `None` does not say that it is wrong.
#[inline(always)]
fn short(text: &[u8]) -> Option<(f64, usize)> {
    let all = Eight::new(text);
    let minus = usize::from(all.byte(0) == b'-');
    let unsigned = all.skip(minus);
    let others = unsigned.others();
    let whole = others.first();
    let (digits, joined, end) = if unsigned.byte(whole) == b'.' {
        let end = others.second();
        (end.wrapping_sub(1), unsigned.without(others), end)
    } else {
        (whole, unsigned, whole)
    };
    if digits == 0 {
        return None;
    }
    let value = exact(joined.number(digits)) / SIGNED_POWERS[minus][(digits - whole) % 8];
    Some((value, end + minus))
}

/// A whole number as an `f64`: in the place of the mantissa behind 2⁵², which is taken off again. The processor's own conversion
/// would wait for the number before.
#[inline(always)]
fn exact(number: u32) -> f64 {
    f64::from_bits(TWO_52.to_bits() | u64::from(number)) - TWO_52
}

/// Any decimal, character by character.
#[inline(never)]
fn long(text: &[u8]) -> Option<(f64, usize)> {
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
