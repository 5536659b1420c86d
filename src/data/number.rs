//! Numbers as people write them in data files, read exactly; and why a text is none.

/// Largest magnitude accepted: its square, and sums of such squares, still fit a double.
pub(crate) const LARGEST: f64 = 1e150;

/// Smallest magnitude accepted beside zero: its square is still a double.
pub(crate) const SMALLEST: f64 = 1e-150;

/// Powers of ten that a double holds exactly.
const TENS: [f64; 23] =
    [1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22];

/// Whole numbers up to here are doubles.
const EXACT: u64 = 1 << 53;

/// Digits that a `u64` always holds.
const DIGITS: usize = 19;

/// The double nearest to a decimal or scientific number: sign, digits with at most one `decimal` mark, exponent. `None`
/// where the text is anything else, with spaces around it too. The result may be infinite (`1e999`) or zero (`1e-999`).
///
/// A significand and a power of ten that are both exact give the nearest double by one operation (Clinger 1990); all else
/// goes to the standard library, which rounds correctly.
///
/// ```
/// use aforesaid::data::number::parse;
/// assert_eq!(parse(b"-27.5", b'.'), Some(-27.5));
/// assert_eq!(parse(b"+1,5e2", b','), Some(150.0));
/// assert_eq!(parse(b"inf", b'.'), None);
/// ```
pub fn parse(text: &[u8], decimal: u8) -> Option<f64> {
    if let Some((value, length)) = plain_prefix(text, decimal)
        && length == text.len()
    {
        return Some(value);
    }
    is_number(text, decimal).then(|| by_the_standard_library(text, decimal)).flatten()
}

/// Whether a text is a number: sign, digits with at most one decimal mark, exponent.
fn is_number(text: &[u8], decimal: u8) -> bool {
    let text = match text {
        [b'+' | b'-', rest @ ..] => rest,
        text => text,
    };
    let digits = |text: &[u8]| text.iter().take_while(|byte| byte.is_ascii_digit()).count();
    let whole = digits(text);
    let rest = &text[whole..];
    let (places, rest) = match rest.first() {
        Some(mark) if *mark == decimal => {
            let places = digits(&rest[1..]);
            (places, &rest[1 + places..])
        }
        _ => (0, rest),
    };
    whole + places > 0 && (rest.is_empty() || is_exponent(rest))
}

/// The number that `text` begins with, and its length, where it is a plain decimal that one operation reads exactly. What
/// follows is for the caller to look at.
pub(super) fn plain_prefix(text: &[u8], decimal: u8) -> Option<(f64, usize)> {
    let negative = *text.first()? == b'-';
    let start = usize::from(negative);
    let (mut significand, mut at) = digits_from(text, start, 0);
    let mut digits = at - start;
    let mut places = 0;
    if text.get(at) == Some(&decimal) {
        let first = at + 1;
        (significand, at) = digits_from(text, first, significand);
        places = at - first;
        digits += places;
    }
    let exact = (1..=DIGITS).contains(&digits) && significand <= EXACT;
    let size = exact.then(|| significand as f64 / TENS[places])?;
    Some((if negative { -size } else { size }, at))
}

/// Appends the digits from `at` on to a number, modulo 2^64; the number, and where the digits end.
fn digits_from(text: &[u8], mut at: usize, mut number: u64) -> (u64, usize) {
    while let Some(word) = text.get(at..at + 8).and_then(|word| word.try_into().ok()).map(u64::from_le_bytes) {
        let (value, count) = leading_digits(word);
        number = number.wrapping_mul(WHOLE_TENS[count]).wrapping_add(value);
        at += count;
        if count < 8 {
            return (number, at);
        }
    }
    while let Some(digit) = text.get(at).map(|byte| u64::from(byte.wrapping_sub(b'0'))).filter(|digit| *digit < 10) {
        number = number.wrapping_mul(10).wrapping_add(digit);
        at += 1;
    }
    (number, at)
}

/// Powers of ten as whole numbers.
const WHOLE_TENS: [u64; 9] = [1, 10, 100, 1000, 10_000, 100_000, 1_000_000, 10_000_000, 100_000_000];

/// The number that eight bytes of text begin with, the first byte lowest, and how many of them are digits; all at once,
/// pairs of digits first, then fours, then eight.
fn leading_digits(word: u64) -> (u64, usize) {
    let digits = word ^ 0x3030_3030_3030_3030;
    // The highest bit of every byte that is no digit. Where a carry runs on it is only into bytes after such a byte.
    let others = (digits.wrapping_add(0x7676_7676_7676_7676) | digits) & 0x8080_8080_8080_8080;
    let count = others.trailing_zeros() as usize / 8;
    if count == 0 {
        return (0, 0);
    }
    let aligned = digits << (64 - 8 * count);
    let pairs = aligned.wrapping_mul(10).wrapping_add(aligned >> 8);
    const PAIR: u64 = 0x0000_00FF_0000_00FF;
    let first = (pairs & PAIR).wrapping_mul(0x000F_4240_0000_0064);
    let second = ((pairs >> 16) & PAIR).wrapping_mul(0x0000_2710_0000_0001);
    (first.wrapping_add(second) >> 32, count)
}

/// `e` or `E`, perhaps a sign, digits, and nothing else.
fn is_exponent(text: &[u8]) -> bool {
    let [b'e' | b'E', rest @ ..] = text else { return false };
    let digits = match rest {
        [b'+' | b'-', digits @ ..] => digits,
        digits => digits,
    };
    !digits.is_empty() && digits.iter().all(u8::is_ascii_digit)
}

fn by_the_standard_library(text: &[u8], decimal: u8) -> Option<f64> {
    let text = std::str::from_utf8(text).ok()?;
    if decimal == b'.' { text.parse().ok() } else { text.replacen(decimal as char, ".", 1).parse().ok() }
}

/// Why a text is no number.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(crate) enum NotANumber {
    /// A word for infinity or for "not a number".
    NotFinite,
    /// It would be a number if the other decimal mark were announced.
    OtherDecimalMark,
    /// Groups of three digits are set apart.
    Grouped,
    /// It has a typographic minus sign.
    MinusSign,
    /// A number followed by a unit or a per cent sign.
    WithUnit,
    /// Anything else.
    Text,
}

/// Why `text`, which [`parse`] refused, is no number.
pub(crate) fn why_not(text: &str, decimal: u8) -> NotANumber {
    let other = if decimal == b'.' { b',' } else { b'.' };
    let bare = text.trim_start_matches(['+', '-']);
    if ["inf", "infinity", "nan", "infinite", "1.#inf", "1.#qnan"].iter().any(|word| bare.eq_ignore_ascii_case(word)) {
        return NotANumber::NotFinite;
    }
    if is_grouped(bare, decimal, other) {
        return NotANumber::Grouped;
    }
    if parse(text.as_bytes(), other).is_some() {
        return NotANumber::OtherDecimalMark;
    }
    if let Some(rest) = text.strip_prefix(['\u{2212}', '\u{2013}'])
        && parse(rest.as_bytes(), decimal).is_some()
    {
        return NotANumber::MinusSign;
    }
    let number = bare.trim_end_matches(|c: char| c.is_alphabetic() || c.is_whitespace() || matches!(c, '%' | '/' | '\u{b0}' | '*'));
    if number.len() < bare.len() && parse(number.as_bytes(), decimal).is_some() {
        return NotANumber::WithUnit;
    }
    NotANumber::Text
}

/// Whether the digits before the decimal mark stand in groups of three. One comma or point that could as well be a
/// decimal mark (`1,234`) is not taken for it.
fn is_grouped(text: &str, decimal: u8, other: u8) -> bool {
    let gaps = [other as char, ' ', '\u{a0}', '\u{202f}', '\u{2009}', '\'', '_'];
    let (whole, fraction) = match text.split_once(decimal as char) {
        Some((whole, fraction)) => (whole, Some(fraction)),
        None => (text, None),
    };
    gaps.iter().any(|gap| {
        let groups: Vec<&str> = whole.split(*gap).collect();
        let digits = |text: &str| text.bytes().all(|byte| byte.is_ascii_digit());
        groups.len() > 1
            && (1..=3).contains(&groups[0].len())
            && groups[1..].iter().all(|group| group.len() == 3)
            && groups.iter().all(|group| digits(group))
            && fraction.is_none_or(digits)
            && (*gap != other as char || groups.len() > 2 || fraction.is_some())
    })
}

/// Whether every digit of the significand is zero.
pub(crate) fn is_written_zero(text: &[u8]) -> bool {
    let significand = text.split(|byte| matches!(byte, b'e' | b'E')).next().unwrap_or(text);
    !significand.iter().any(|byte| matches!(byte, b'1'..=b'9'))
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    proptest! {
        // The standard library's parser is held to the nearest double by its own test suite.
        #[test]
        fn agrees_with_the_standard_library(text in "[+-]?[0-9]{0,24}(\\.[0-9]{0,24})?([eE][+-]?[0-9]{1,4})?") {
            let standard: Option<f64> = text.parse().ok();
            prop_assert_eq!(parse(text.as_bytes(), b'.').map(f64::to_bits), standard.map(f64::to_bits));
        }

        #[test]
        fn accepts_no_more_than_the_standard_library(text in "[0-9+.eE, infa-]{0,8}") {
            if let Some(value) = parse(text.as_bytes(), b'.') {
                prop_assert_eq!(Ok(value.to_bits()), text.parse::<f64>().map(f64::to_bits));
            }
        }

        #[test]
        fn a_comma_reads_like_a_point(text in "-?[0-9]{1,9}\\.[0-9]{1,20}") {
            prop_assert_eq!(parse(text.replace('.', ",").as_bytes(), b','), text.parse().ok());
        }
    }

    #[test]
    fn reasons() {
        for (text, decimal, why) in [
            ("12,5", b'.', NotANumber::OtherDecimalMark),
            ("1,234", b'.', NotANumber::OtherDecimalMark),
            ("12.5", b',', NotANumber::OtherDecimalMark),
            ("1,234.5", b'.', NotANumber::Grouped),
            ("1.234,5", b',', NotANumber::Grouped),
            ("1,234,567", b'.', NotANumber::Grouped),
            ("1 234", b'.', NotANumber::Grouped),
            ("1'234.5", b'.', NotANumber::Grouped),
            ("-Inf", b'.', NotANumber::NotFinite),
            ("NaN", b'.', NotANumber::NotFinite),
            ("\u{2212}3", b'.', NotANumber::MinusSign),
            ("12 mm", b'.', NotANumber::WithUnit),
            ("12%", b'.', NotANumber::WithUnit),
            ("1.2.3", b'.', NotANumber::Text),
            ("0x1F", b'.', NotANumber::Text),
            ("twelve", b'.', NotANumber::Text),
        ] {
            assert_eq!(parse(text.as_bytes(), decimal), None, "{text}");
            assert_eq!(why_not(text, decimal), why, "{text}");
        }
    }
}
