//! The whole payload is one value: a number as text, or for a gate a word.

use super::fault::Fault;
use super::intake::{Reader, Told};
use super::literal;
use super::tables::{Scalar, Target};

/// Reads the value of a payload that is nothing else.
pub(super) fn read(reader: &mut Reader<'_>, targets: &[Target], text: &str) {
    let text = text.trim();
    for target in targets {
        let told = match target {
            Target::Gate {
                reference, open, ..
            } => Ok(Told::Gate {
                reference: *reference,
                phenomenon: reader.received,
                open: open.iter().any(|wanted| says(wanted, text)),
            }),
            Target::Indication(_) | Target::Reference(_) | Target::Influence(_) => {
                value(reader, text)
            }
        };
        reader.tell(target, told);
    }
}

fn value(reader: &Reader<'_>, text: &str) -> Result<Told, Fault> {
    Ok(Told::Reading {
        phenomenon: reader.received,
        value: literal::number(text)?,
        sequence: None,
        excluded: false,
    })
}

/// Whether a bare word is what a gate waits for: `on`, `1`, `true`, also in the quotes of JSON.
pub(crate) fn says(wanted: &Scalar, text: &str) -> bool {
    match wanted {
        Scalar::Text(word) => {
            word == text || serde_json::from_str(text).is_ok_and(|t: String| t == *word)
        }
        Scalar::Number(number) => literal::number(text) == Ok(*number),
        Scalar::Truth(truth) => text.parse() == Ok(*truth),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_gate_compares_words_numbers_and_truth_values() {
        let word = Scalar::Text("zero".to_owned());
        assert!(says(&word, "zero") && says(&word, "\"zero\""));
        assert!(!says(&word, "Zero") && !says(&word, "zero-check"));
        assert!(says(&Scalar::Number(1.0), "1") && says(&Scalar::Number(1.0), "1.0"));
        assert!(!says(&Scalar::Number(1.0), "true") && !says(&Scalar::Truth(true), "1"));
        assert!(says(&Scalar::Truth(true), "true"));
    }
}
