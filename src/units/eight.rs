//! Eight characters of a line at once: how many are digits, and the number that they make.
//!
//! Records are long and numbers short: one load and a few multiplications take the place of a loop over characters, whose
//! length no processor can foretell.

/// `0` in each of eight bytes.
const ZEROS: u64 = 0x3030_3030_3030_3030;
/// The high bit of each of eight bytes.
const HIGH: u64 = 0x8080_8080_8080_8080;
/// What takes 10 and more, but not 9, to the high bit of a byte.
const ABOVE_NINE: u64 = 0x7676_7676_7676_7676;

/// Eight bytes, the first one lowest.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Eight(u64);

impl Eight {
    /// The first eight bytes of `text`; behind its end come NULs.
    ///
    /// ```
    /// use steadytap::units::eight::Eight;
    /// let text = Eight::new(b"1234,5");
    /// assert_eq!((text.others().first(), text.number(4)), (4, 1234));
    /// ```
    #[inline(always)]
    pub fn new(text: &[u8]) -> Self {
        match (text.first_chunk(), text.first_chunk::<4>(), text.last_chunk::<4>()) {
            (Some(eight), ..) => Self(u64::from_le_bytes(*eight)),
            (None, Some(first), Some(last)) => {
                let (first, last) = (u32::from_le_bytes(*first), u32::from_le_bytes(*last));
                Self(u64::from(first) | u64::from(last) << (8 * (text.len() - 4)))
            }
            _ => Self(text.iter().rev().fold(0, |all, c| all << 8 | u64::from(*c))),
        }
    }

    /// Without the first `n` (0–7): the later ones move up, and NULs come last.
    #[inline(always)]
    pub fn skip(self, n: usize) -> Self {
        Self(self.0 >> (8 * n))
    }

    /// Byte `i` (0–7).
    #[inline(always)]
    pub fn byte(self, i: usize) -> u8 {
        (self.0 >> (8 * (i % 8))) as u8
    }

    /// Without the byte of the first place: the later ones move up, and a NUL comes last.
    #[inline(always)]
    pub fn without(self, place: Others) -> Self {
        let before = (place.0 & place.0.wrapping_neg()) >> 7;
        let before = before.wrapping_sub(1);
        Self((self.0 & before) | ((self.0 >> 8) & !before))
    }

    /// Where the bytes are that are no digits.
    #[inline(always)]
    pub fn others(self) -> Others {
        let values = self.0 ^ ZEROS;
        Others((((values & !HIGH) + ABOVE_NINE) | values) & HIGH)
    }

    /// The number that the first `n` (1–8) bytes make, all of them digits.
    ///
    /// *Method* pairs, fours, then all eight by three multiplications (D. Lemire, "Quickly parsing eight digits", 2018).
    #[inline(always)]
    pub fn number(self, n: usize) -> u32 {
        // Leading zeros in front of a shorter number.
        let digits = (self.0 ^ ZEROS) << (8 * (8 - n));
        let pairs = digits.wrapping_mul(10).wrapping_add(digits >> 8);
        let low = (pairs & 0x0000_00FF_0000_00FF).wrapping_mul(100 + (1_000_000 << 32));
        let high = ((pairs >> 16) & 0x0000_00FF_0000_00FF).wrapping_mul(1 + (10_000 << 32));
        (low.wrapping_add(high) >> 32) as u32
    }
}

/// Places in eight bytes, as the high bit of each.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub struct Others(u64);

impl Others {
    /// The first one; 8 when there is none.
    #[inline(always)]
    pub fn first(self) -> usize {
        self.0.trailing_zeros() as usize / 8
    }

    /// The second one; 8 when there is none.
    #[inline(always)]
    pub fn second(self) -> usize {
        Self(self.0 & self.0.wrapping_sub(1)).first()
    }
}
