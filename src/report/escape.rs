//! Keeps texts of plans and data from becoming markup.

/// Text for Markdown: white space and control characters folded, everything that Markdown reads as markup escaped.
pub(super) fn markdown(text: &str) -> String {
    let folded = fold(text);
    let mut escaped = String::with_capacity(folded.len() + 8);
    for (place, character) in folded.chars().enumerate() {
        let anywhere =
            matches!(character, '\\' | '`' | '*' | '_' | '[' | ']' | '<' | '>' | '|' | '~' | '&' | '!' | '#' | '{' | '}' | '$' | '^');
        // These open a block only where a line starts, or after the digits of an ordered list.
        let starting = matches!(character, '+' | '-' | '=' | ':') && place == 0;
        let after_number =
            matches!(character, '.' | ')') && place > 0 && folded[..folded.len().min(place)].bytes().all(|byte| byte.is_ascii_digit());
        if anywhere || starting || after_number {
            escaped.push('\\');
        }
        escaped.push(character);
    }
    escaped
}

/// Text for HTML and SVG.
pub(super) fn html(text: &str) -> String {
    let mut escaped = String::with_capacity(text.len());
    for character in fold(text).chars() {
        match character {
            '&' => escaped.push_str("&amp;"),
            '<' => escaped.push_str("&lt;"),
            '>' => escaped.push_str("&gt;"),
            '"' => escaped.push_str("&quot;"),
            '\'' => escaped.push_str("&#39;"),
            other => escaped.push(other),
        }
    }
    escaped
}

/// White space as single blanks, other control characters left out.
pub(super) fn fold(text: &str) -> String {
    let spaced: String =
        text.chars().map(|c| if c.is_whitespace() { ' ' } else { c }).filter(|c| !c.is_control() && !is_direction(*c)).collect();
    spaced.split(' ').filter(|part| !part.is_empty()).collect::<Vec<_>>().join(" ")
}

/// Marks that turn the direction of text round and could hide what stands there.
fn is_direction(c: char) -> bool {
    matches!(c, '\u{200E}' | '\u{200F}' | '\u{202A}'..='\u{202E}' | '\u{2066}'..='\u{2069}')
}

/// At most `most` characters, with a mark where something was cut.
pub(super) fn shorten(text: &str, most: usize) -> String {
    let folded = fold(text);
    if folded.chars().count() <= most { folded } else { folded.chars().take(most.saturating_sub(1)).chain(['\u{2026}']).collect() }
}
