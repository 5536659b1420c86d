//! What a plain scalar means, by the core schema of YAML 1.2.

use super::tree::Value;

/// The meaning of a plain (unquoted) scalar; `None` for one that YAML reads as a number that is not finite.
pub(super) fn plain(text: &str) -> Option<Value> {
    Some(match text {
        "" | "~" | "null" | "Null" | "NULL" => Value::Null,
        "true" | "True" | "TRUE" => Value::Bool { text: text.to_owned(), value: true },
        "false" | "False" | "FALSE" => Value::Bool { text: text.to_owned(), value: false },
        _ => match number(text) {
            None => Value::Text(text.to_owned()),
            Some(value) if value.is_finite() => Value::Number { text: text.to_owned(), value },
            Some(_) => return None,
        },
    })
}

fn number(text: &str) -> Option<f64> {
    let unsigned = text.strip_prefix(['-', '+']).unwrap_or(text);
    if matches!(unsigned, ".inf" | ".Inf" | ".INF") || matches!(text, ".nan" | ".NaN" | ".NAN") {
        return Some(f64::INFINITY);
    }
    // `from_str_radix` would take a sign.
    let whole = |digits: &str, radix| {
        let value = u64::from_str_radix(digits, radix).ok().filter(|_| digits.starts_with(|c: char| c.is_ascii_hexdigit()));
        value.map(|value| value as f64)
    };
    if let Some(digits) = text.strip_prefix("0x") {
        return whole(digits, 16);
    }
    if let Some(digits) = text.strip_prefix("0o") {
        return whole(digits, 8);
    }
    let starts = unsigned.starts_with(|c: char| c.is_ascii_digit())
        || unsigned.strip_prefix('.').is_some_and(|rest| rest.starts_with(|c: char| c.is_ascii_digit()));
    let decimal = starts && unsigned.bytes().all(|byte| matches!(byte, b'0'..=b'9' | b'.' | b'e' | b'E' | b'+' | b'-'));
    if decimal { text.parse().ok() } else { None }
}
