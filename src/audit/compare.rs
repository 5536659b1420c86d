//! Results of two releases compared: words exactly, numbers to 1e-9.

use serde_json::Value;

/// The first place at which two `results.json` differ by more than two releases may.
pub(super) fn first_difference(stored: &[u8], again: &[u8]) -> Option<String> {
    match (serde_json::from_slice::<Value>(stored), serde_json::from_slice::<Value>(again)) {
        (Ok(stored), Ok(again)) => differs("results.json", &stored, &again, 0.0),
        _ => Some("results.json is not JSON".to_owned()),
    }
}

/// Hashes of decisions depend on how a release words them.
const NOT_COMPARED: &[&str] = &["decision"];

fn differs(place: &str, stored: &Value, again: &Value, standard_error: f64) -> Option<String> {
    match (stored, again) {
        (Value::Number(stored), Value::Number(again)) => {
            let (stored, again) = (stored.as_f64()?, again.as_f64()?);
            let scale = stored.abs().max(standard_error);
            ((stored - again).abs() > 1e-9 * scale).then(|| format!("{place}: {stored} became {again}"))
        }
        (Value::Object(stored), Value::Object(again)) => {
            let error = stored.get("standard_error").and_then(Value::as_f64).unwrap_or(standard_error);
            stored.iter().filter(|(key, _)| !NOT_COMPARED.contains(&key.as_str())).find_map(|(key, value)| {
                let place = format!("{place}/{key}");
                match again.get(key) {
                    Some(other) => differs(&place, value, other, error),
                    None => Some(format!("{place} is gone")),
                }
            })
        }
        (Value::Array(stored), Value::Array(again)) if stored.len() == again.len() => stored
            .iter()
            .zip(again)
            .enumerate()
            .find_map(|(number, (one, other))| differs(&format!("{place}/{number}"), one, other, standard_error)),
        (stored, again) => (stored != again).then(|| format!("{place}: {stored} became {again}")),
    }
}

#[cfg(test)]
mod tests {
    use super::first_difference;

    #[test]
    fn numbers_may_move_in_their_last_digits_and_verdicts_not_at_all() {
        let stored = br#"{"steps":[{"verdict":"significant","p":0.01,"estimate":1e-12,"standard_error":1,"decision":"a"}]}"#;
        let near = br#"{"steps":[{"verdict":"significant","p":0.010000000000001,"estimate":2e-12,"standard_error":1,"decision":"b"}]}"#;
        assert_eq!(first_difference(stored, near), None);
        let far = br#"{"steps":[{"verdict":"significant","p":0.0100001,"estimate":1e-12,"standard_error":1}]}"#;
        assert_eq!(first_difference(stored, far).as_deref(), Some("results.json/steps/0/p: 0.01 became 0.0100001"));
        let turned = br#"{"steps":[{"verdict":"not significant","p":0.01,"estimate":1e-12,"standard_error":1}]}"#;
        assert!(first_difference(stored, turned).is_some_and(|text| text.contains("verdict")));
    }
}
