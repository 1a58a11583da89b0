//! Validates published documents against the schemas in `config/schemas`.

use super::listener::Heard;
use jsonschema::Validator;
use std::collections::BTreeMap;
use std::path::Path;

/// The schemas.
pub(crate) struct Schemas {
    validators: BTreeMap<String, Validator>,
}

impl Schemas {
    /// Reads all of them.
    pub(crate) fn read() -> Self {
        let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("config/schemas");
        let mut validators = BTreeMap::new();
        for entry in std::fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            let text = std::fs::read_to_string(&path).unwrap();
            let schema = serde_json::from_str(&text).unwrap();
            jsonschema::draft202012::meta::validate(&schema)
                .unwrap_or_else(|error| panic!("{}: {error}", path.display()));
            let name = path.file_stem().unwrap().to_str().unwrap().to_owned();
            validators.insert(name, jsonschema::draft202012::new(&schema).unwrap());
        }
        Self { validators }
    }

    /// Panics when a document does not follow its schema. Returns the schema's name.
    pub(crate) fn check(&self, heard: &Heard) -> &str {
        let kind = heard.topic.split('/').nth(2).unwrap();
        if heard.payload.is_empty() {
            assert!(kind != "state" && kind != "notice", "cleared: {heard:?}");
        }
        let Some((name, validator)) = self.validators.get_key_value(kind) else {
            panic!("no schema for {}", heard.topic);
        };
        if !heard.payload.is_empty() {
            let json = heard.json();
            let errors: Vec<String> = validator
                .iter_errors(&json)
                .map(|it| format!("{}: {it}", it.instance_path()))
                .collect();
            assert!(
                errors.is_empty(),
                "{}: {errors:?}\n{}",
                heard.topic,
                heard.payload
            );
        }
        name
    }
}
