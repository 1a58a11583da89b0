//! All wanted values of a JSON text in one pass, as the pieces of text they are.
//!
//! A tree of the wanted pointers walks through the document beside the parser; whatever no pointer
//! leads to is skipped without being kept. Values stay text, so that numbers lose no digits and
//! 1e400 is a value that can be named in a refusal instead of a broken document.

use super::pointer::Pointer;
use serde::de::{DeserializeSeed, Deserializer, Error, IgnoredAny, MapAccess, SeqAccess, Visitor};
use serde_json::value::RawValue;
use std::fmt;

/// The wanted pointers of one topic.
#[derive(Clone, Debug, Default)]
pub(crate) struct Picker {
    root: Node,
    slots: usize,
}

/// Number of a wanted value; equal pointers share one.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub(crate) struct Slot(usize);

/// What a document held, by slot; `None` where the pointer led nowhere.
#[derive(Debug, Default)]
pub(crate) struct Picked<'text>(Vec<Option<&'text str>>);

/// One level of the tree.
#[derive(Clone, Debug, Default)]
struct Node {
    slot: Option<Slot>,
    children: Vec<(String, Node)>,
}

impl Picker {
    /// Wants the value that a pointer leads to.
    pub(crate) fn want(&mut self, pointer: &Pointer) -> Slot {
        let mut node = &mut self.root;
        for token in pointer.tokens() {
            let index = node.child(token).unwrap_or_else(|| {
                node.children.push((token.clone(), Node::default()));
                node.children.len() - 1
            });
            node = &mut node.children[index].1;
        }
        *node.slot.get_or_insert_with(|| {
            self.slots += 1;
            Slot(self.slots - 1)
        })
    }

    /// Walks through a document. Where an object names a key twice, the last one counts.
    pub(crate) fn pick<'text>(&self, text: &'text str) -> Result<Picked<'text>, serde_json::Error> {
        let mut found = Picked(vec![None; self.slots]);
        let mut document = serde_json::Deserializer::from_str(text);
        Walk {
            node: &self.root,
            found: &mut found,
        }
        .deserialize(&mut document)?;
        document.end()?;
        Ok(found)
    }
}

impl<'text> Picked<'text> {
    /// The text of a wanted value, without blanks around it.
    pub(crate) fn get(&self, slot: Slot) -> Option<&'text str> {
        self.0[slot.0]
    }
}

impl Node {
    fn child(&self, token: &str) -> Option<usize> {
        self.children.iter().position(|(name, _)| name == token)
    }

    /// Forgets what an earlier value of the same key had brought.
    fn clear(&self, found: &mut Picked<'_>) {
        if let Some(slot) = self.slot {
            found.0[slot.0] = None;
        }
        for (_, child) in &self.children {
            child.clear(found);
        }
    }
}

/// One value of the document beside its node of the tree.
struct Walk<'walk, 'text> {
    node: &'walk Node,
    found: &'walk mut Picked<'text>,
}

impl<'text> DeserializeSeed<'text> for Walk<'_, 'text> {
    type Value = ();

    fn deserialize<D: Deserializer<'text>>(self, value: D) -> Result<(), D::Error> {
        let Some(slot) = self.node.slot else {
            return value.deserialize_any(self);
        };
        let raw: &RawValue = serde::Deserialize::deserialize(value)?;
        self.found.0[slot.0] = Some(raw.get());
        if self.node.children.is_empty() {
            return Ok(());
        }
        // Another pointer leads deeper into this value: rare, so its piece is read again.
        serde_json::Deserializer::from_str(raw.get())
            .deserialize_any(self)
            .map_err(D::Error::custom)
    }
}

impl<'text> Visitor<'text> for Walk<'_, 'text> {
    type Value = ();

    fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str("a JSON value")
    }

    fn visit_map<A: MapAccess<'text>>(self, mut map: A) -> Result<(), A::Error> {
        while let Some(child) = map.next_key_seed(Key(self.node))? {
            match child {
                Some(index) => {
                    let node = &self.node.children[index].1;
                    node.clear(self.found);
                    map.next_value_seed(Walk {
                        node,
                        found: &mut *self.found,
                    })?;
                }
                None => {
                    map.next_value::<IgnoredAny>()?;
                }
            }
        }
        Ok(())
    }

    fn visit_seq<A: SeqAccess<'text>>(self, mut seq: A) -> Result<(), A::Error> {
        for index in 0_u64.. {
            let child = self
                .node
                .children
                .iter()
                .find(|(token, _)| is_index(token, index));
            let more = match child {
                Some((_, node)) => seq
                    .next_element_seed(Walk {
                        node,
                        found: &mut *self.found,
                    })?
                    .is_some(),
                None => seq.next_element::<IgnoredAny>()?.is_some(),
            };
            if !more {
                break;
            }
        }
        Ok(())
    }

    // A pointer wanted to go on below a value that has no below: it led nowhere.
    fn visit_bool<E>(self, _: bool) -> Result<(), E> {
        Ok(())
    }
    fn visit_i64<E>(self, _: i64) -> Result<(), E> {
        Ok(())
    }
    fn visit_u64<E>(self, _: u64) -> Result<(), E> {
        Ok(())
    }
    fn visit_f64<E>(self, _: f64) -> Result<(), E> {
        Ok(())
    }
    fn visit_str<E>(self, _: &str) -> Result<(), E> {
        Ok(())
    }
    fn visit_unit<E>(self) -> Result<(), E> {
        Ok(())
    }
}

/// Whether a token names an element of an array: decimal digits without leading zeros (RFC 6901
/// section 4).
fn is_index(token: &str, index: u64) -> bool {
    let plain = token == "0"
        || (!token.starts_with('0') && token.bytes().all(|digit| digit.is_ascii_digit()));
    plain && token.parse() == Ok(index)
}

/// A key of an object, compared with the wanted ones without being kept.
struct Key<'walk>(&'walk Node);

impl<'text> DeserializeSeed<'text> for Key<'_> {
    type Value = Option<usize>;

    fn deserialize<D: Deserializer<'text>>(self, key: D) -> Result<Option<usize>, D::Error> {
        key.deserialize_str(self)
    }
}

impl Visitor<'_> for Key<'_> {
    type Value = Option<usize>;

    fn expecting(&self, out: &mut fmt::Formatter<'_>) -> fmt::Result {
        out.write_str("a key")
    }

    fn visit_str<E>(self, key: &str) -> Result<Option<usize>, E> {
        Ok(self.0.child(key))
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    fn pick(text: &str, pointers: &[&str]) -> Option<Vec<Option<String>>> {
        let mut picker = Picker::default();
        let slots: Vec<Slot> = pointers
            .iter()
            .map(|pointer| picker.want(&Pointer::parse(pointer).unwrap()))
            .collect();
        let picked = picker.pick(text).ok()?;
        Some(
            slots
                .iter()
                .map(|slot| picked.get(*slot).map(str::to_owned))
                .collect(),
        )
    }

    #[test]
    fn finds_pieces_of_text_in_one_pass() {
        let text = r#" {"a": {"b": 1.50, "c": [10, {"d": "x\"y"}, 30]}, "e": 1e400, "a/b": null} "#;
        let found = pick(
            text,
            &[
                "/a/b", "/a/c/1/d", "/e", "/a~1b", "/a/c/3", "/a/c", "/a/c/0", "",
            ],
        );
        let piece = |text: &str| Some(text.to_owned());
        assert_eq!(
            found.unwrap(),
            [
                piece("1.50"),
                piece("\"x\\\"y\""),
                piece("1e400"),
                piece("null"),
                None,
                piece("[10, {\"d\": \"x\\\"y\"}, 30]"),
                piece("10"),
                piece(text.trim()),
            ]
        );
    }

    #[test]
    fn keys_may_be_escaped_and_the_last_of_two_counts() {
        assert_eq!(
            pick(r#"{"\u0061": 1}"#, &["/a"]),
            Some(vec![Some("1".to_owned())])
        );
        assert_eq!(
            pick(r#"{"a": 1, "a": 2}"#, &["/a"]),
            Some(vec![Some("2".to_owned())])
        );
        assert_eq!(
            pick(r#"{"a": {"b": 1}, "a": {}}"#, &["/a/b"]),
            Some(vec![None])
        );
    }

    #[test]
    fn indices_are_written_without_leading_zeros() {
        assert_eq!(
            pick("[1, 2]", &["/01", "/+1", "/-", "/1"]).unwrap()[..3],
            [None, None, None]
        );
    }

    #[test]
    fn broken_documents_are_errors() {
        for text in [
            "",
            "{",
            "{\"a\": 1} x",
            "{\"a\": NaN}",
            "{a: 1}",
            "[1,]",
            "\"\u{1}\"",
        ] {
            assert_eq!(pick(text, &["/a"]), None, "{text}");
        }
        assert_eq!(
            pick(&"[".repeat(500_000), &["/a"]),
            None,
            "nesting does not end the stack"
        );
        let deep = format!("{{\"a\": {}{}}}", "[".repeat(100_000), "]".repeat(100_000));
        assert!(
            pick(&deep, &["/a"]).is_some(),
            "deep, but nobody goes down there"
        );
    }

    /// A slow, obvious reference: the whole document as a tree, then `Value::pointer`.
    fn slow(document: &serde_json::Value, pointer: &str) -> Option<serde_json::Value> {
        document.pointer(pointer).cloned()
    }

    fn documents() -> impl Strategy<Value = serde_json::Value> {
        let leaf = prop_oneof![
            Just(serde_json::Value::Null),
            any::<bool>().prop_map(Into::into),
            any::<i64>().prop_map(Into::into),
            "[a-c~/\"\\\\]{0,3}".prop_map(Into::into),
        ];
        leaf.prop_recursive(4, 40, 4, |inner| {
            prop_oneof![
                prop::collection::vec(inner.clone(), 0..4).prop_map(Into::into),
                prop::collection::btree_map("[a-c]{0,2}", inner, 0..4)
                    .prop_map(|map| serde_json::Value::Object(map.into_iter().collect())),
            ]
        })
    }

    proptest! {
        #[test]
        fn agrees_with_the_whole_tree(
            document in documents(),
            pointers in prop::collection::vec("(/([a-c]{0,2}|[0-3])){0,4}", 1..5),
        ) {
            let text = document.to_string();
            let names: Vec<&str> = pointers.iter().map(String::as_str).collect();
            let found = pick(&text, &names).expect("the document is sound");
            for (pointer, piece) in pointers.iter().zip(found) {
                let value = piece.map(|piece| serde_json::from_str(&piece).unwrap());
                prop_assert_eq!(value, slow(&document, pointer), "{} in {}", pointer, text);
            }
        }
    }
}
