//! JSON pointers (RFC 6901), taken apart once when the configuration is read.

use std::fmt;

/// Deepest pointer accepted; a sensor payload nested deeper is a mistake.
const LEVELS_MAX: usize = 32;

/// A JSON pointer as its unescaped reference tokens; none: the whole document.
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord)]
pub struct Pointer {
    tokens: Vec<String>,
}

impl Pointer {
    /// Reads a pointer as RFC 6901 section 3 writes it: empty, or tokens that each begin with `/`,
    /// in which `~1` is `/` and `~0` is `~`.
    ///
    /// # Errors
    /// A sentence for the technician that says what is wrong and what to write instead.
    pub fn parse(text: &str) -> Result<Self, String> {
        if text.is_empty() {
            return Ok(Self { tokens: Vec::new() });
        }
        let Some(rest) = text.strip_prefix('/') else {
            return Err(format!(
                "\"{text}\" is not a JSON pointer: it must begin with /, write \"/{text}\""
            ));
        };
        let tokens: Vec<String> = rest
            .split('/')
            .map(unescape)
            .collect::<Option<_>>()
            .ok_or_else(|| {
                format!("\"{text}\" is not a JSON pointer: ~ must be written ~0, and / in a key ~1")
            })?;
        if tokens.len() > LEVELS_MAX {
            return Err(format!("\"{text}\" has more than {LEVELS_MAX} levels"));
        }
        Ok(Self { tokens })
    }

    /// The unescaped tokens from the document's root to the value.
    #[must_use]
    pub fn tokens(&self) -> &[String] {
        &self.tokens
    }
}

impl fmt::Display for Pointer {
    fn fmt(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        for token in &self.tokens {
            write!(out, "/{}", token.replace('~', "~0").replace('/', "~1"))?;
        }
        Ok(())
    }
}

/// One token without its escapes; `None` if a `~` is followed by neither 0 nor 1.
fn unescape(token: &str) -> Option<String> {
    let mut plain = String::with_capacity(token.len());
    let mut letters = token.chars();
    while let Some(letter) = letters.next() {
        plain.push(match letter {
            '~' => match letters.next()? {
                '0' => '~',
                '1' => '/',
                _ => return None,
            },
            other => other,
        });
    }
    Some(plain)
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Examples of RFC 6901 section 5.
    #[test]
    fn reads_the_examples_of_the_standard() {
        for (text, tokens) in [
            ("", vec![]),
            ("/foo", vec!["foo"]),
            ("/foo/0", vec!["foo", "0"]),
            ("/", vec![""]),
            ("/a~1b", vec!["a/b"]),
            ("/c%d", vec!["c%d"]),
            ("/m~0n", vec!["m~n"]),
            ("/~01", vec!["~1"]),
        ] {
            let pointer = Pointer::parse(text).unwrap();
            assert_eq!(pointer.tokens(), tokens, "{text}");
            assert_eq!(pointer.to_string(), text);
        }
    }

    #[test]
    fn refuses_what_is_not_a_pointer_and_says_what_to_write() {
        assert!(
            Pointer::parse("value")
                .unwrap_err()
                .contains("write \"/value\"")
        );
        assert!(Pointer::parse("/a~2").unwrap_err().contains("~0"));
        assert!(Pointer::parse("/a~").unwrap_err().contains("~0"));
        assert!(
            Pointer::parse(&"/a".repeat(33))
                .unwrap_err()
                .contains("32 levels")
        );
    }
}
