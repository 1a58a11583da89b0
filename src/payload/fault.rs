//! Why something in a payload was refused, with what a person needs to find the fault.

use holdtrue_engine::event::RefusedReason;

/// Longest piece of a payload that is shown, in characters.
const EXCERPT_MAX: usize = 60;

/// One refusal, before it is known whose value it would have been.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Fault {
    pub(crate) reason: RefusedReason,
    pub(crate) detail: String,
}

impl Fault {
    pub(super) fn new(reason: RefusedReason, detail: impl Into<String>) -> Self {
        Self {
            reason,
            detail: detail.into(),
        }
    }
}

/// The beginning of a text, in quotes, control characters made visible, shortened.
pub(crate) fn excerpt(text: &str) -> String {
    let shown: String = text
        .chars()
        .take(EXCERPT_MAX)
        .flat_map(char::escape_debug)
        .collect();
    let more = if text.chars().nth(EXCERPT_MAX).is_some() {
        " …"
    } else {
        ""
    };
    format!("\"{shown}\"{more}")
}

/// The beginning of bytes that may not be text.
pub(super) fn excerpt_bytes(bytes: &[u8]) -> String {
    // Four bytes are the most that one character takes.
    let shown = &bytes[..bytes.len().min(EXCERPT_MAX * 4)];
    excerpt(&String::from_utf8_lossy(shown))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn excerpts_are_short_and_printable() {
        assert_eq!(excerpt("12,5\n"), "\"12,5\\n\"");
        let long = excerpt(&"x".repeat(1000));
        assert!(
            long.chars().count() <= EXCERPT_MAX + 4 && long.ends_with('…'),
            "{long}"
        );
        assert_eq!(excerpt_bytes(&[0xff, b'a']), "\"\u{fffd}a\"");
    }
}
