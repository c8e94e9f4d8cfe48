//! The JSON Schema of a spec, for editors, and the page of a section's keys, both made from the tables
//! of keys. The schema keeps to what the older drafts share: everything inlined, `enum` for a constant.

use crate::spec::keys::{Key, Takes};
use crate::spec::language as of;
use serde_json::{Map, Value, json};

/// Keys of tables that later stages read: every source of a prior, of the within sd, every kind of
/// question. A table without any listed is left open.
#[derive(Debug, Default, Clone)]
pub struct Inner {
    pub prior: Vec<&'static [Key]>,
    pub within: Vec<&'static [Key]>,
    pub question: Vec<&'static [Key]>,
}

/// The schema of a whole spec.
pub fn schema(inner: &Inner) -> Value {
    let prior = || open_or(&inner.prior, &[of::OTHERWISE]);
    let within = || open_or(&inner.within, &[]);
    let list = |item: Value| json!({ "type": "array", "items": item });
    let named = |table: Value| json!({ "type": "object", "additionalProperties": table });
    let texts = || json!({ "type": "object", "additionalProperties": { "type": "string" } });
    let bias = || table(&[of::BIAS], &[]);

    let review = table(
        &[of::REVIEW],
        &[
            ("interpretation", table(&[of::INTERPRETATION], &[])),
            ("particulars", json!({ "type": "object" })),
            ("previous", table(&[of::PREVIOUS], &[])),
            ("supersedes", table(&[of::SUPERSEDES], &[])),
            ("sign_off", list(table(&[of::SIGN_OFF], &[]))),
        ],
    );
    let readings = table(&[of::SOURCE, of::READINGS], &[("marks", table(&[of::MARKS], &[]))]);
    let summaries = table(&[of::SOURCE, of::SUMMARIES], &[("rows", list(table(&[of::SUMMARY_ROW], &[])))]);
    let history = table(&[of::HISTORY], &[("leave_out", list(table(&[of::LEAVE_OUT], &[])))]);
    let alternative = table(&[of::ALTERNATIVE], &[("prior", prior()), ("within", within())]);
    let own_limits = named(table(&[of::SERIES_LIMIT], &[]));
    let series = [
        ("limit", own_limits),
        ("prior", prior()),
        ("within", within()),
        ("bias", json!({ "type": "object" })),
    ];
    let rule = table(&[of::RULE], &[("verdicts", list(table(&[of::VERDICT], &[])))]);
    let mut question_keys = vec![of::QUESTION];
    question_keys.extend(&inner.question);
    let question = match inner.question.is_empty() {
        true => json!({ "type": "object", "required": ["id", "ask"] }),
        false => table_of_some(&question_keys, of::QUESTION, &[("rule", rule)]),
    };
    let mut whole = table(
        &[of::TOP],
        &[
            ("review", review),
            ("quantity", table(&[of::QUANTITY], &[("bias", bias())])),
            ("limit", named(table(&[of::LIMIT], &[]))),
            ("readings", list(readings)),
            ("summaries", list(summaries)),
            ("exclude", list(table(&[of::EXCLUDE], &[]))),
            ("event", list(table(&[of::EVENT], &[]))),
            ("action", list(table(&[of::ACTION], &[]))),
            ("history", history),
            ("within", within()),
            ("prior", prior()),
            ("alternative", list(alternative)),
            ("series", named(table(&[of::SERIES], &series))),
            ("overrides", table(&[of::OVERRIDES], &[("columns", texts())])),
            ("question", list(question)),
            ("report", table(&[of::REPORT], &[])),
        ],
    );
    if let Value::Object(schema) = &mut whole {
        schema.insert("$schema".into(), json!("http://json-schema.org/draft-07/schema#"));
        schema.insert("title".into(), json!("the spec of a review"));
        // What a base gives need not stand in the spec.
        schema.remove("required");
    }
    whole
}

/// The keys of a section, one a line: what each takes and what it is for.
pub fn page(section: &str, keys: &[&[Key]]) -> String {
    let mut page = format!("{section}\n\n");
    for key in keys.iter().copied().flatten() {
        let needed = match (key.served, key.required) {
            (false, _) => " (not served yet)",
            (true, true) => " (required)",
            (true, false) => "",
        };
        page.push_str(&format!(
            "  {}{needed}\n      {}\n      takes {}\n",
            key.name,
            key.help,
            key.takes.in_words()
        ));
    }
    page
}

fn open_or(keys: &[&'static [Key]], more: &[Key]) -> Value {
    if keys.is_empty() {
        return json!({ "type": "object" });
    }
    let mut all = keys.to_vec();
    all.push(more);
    table_of_some(&all, &[], &[])
}

/// A table in which all keys of `keys` may stand and those that `required` requires must: kinds that
/// share a table share its keys.
fn table_of_some(keys: &[&[Key]], required: &[Key], inner: &[(&str, Value)]) -> Value {
    let mut choices: Map<String, Value> = Map::new();
    for key in keys.iter().copied().flatten().filter(|key| key.served) {
        let described = described(key, inner);
        match choices.get_mut(key.name) {
            None => drop(choices.insert(key.name.to_string(), described)),
            Some(known) if *known == described => {}
            Some(known) => either(known, described),
        }
    }
    let mut table = json!({ "type": "object", "additionalProperties": false, "properties": choices });
    let needed: Vec<&str> = required.iter().filter(|key| key.required).map(|key| key.name).collect();
    if !needed.is_empty() {
        table["required"] = json!(needed);
    }
    table
}

/// Two kinds take the same key in two ways: either serves.
fn either(known: &mut Value, other: Value) {
    match known.get_mut("anyOf").and_then(Value::as_array_mut) {
        Some(ways) if ways.contains(&other) => {}
        Some(ways) => ways.push(other),
        None => *known = json!({ "anyOf": [known.clone(), other] }),
    }
}

fn table(keys: &[&[Key]], inner: &[(&str, Value)]) -> Value {
    let all: Vec<Key> = keys.iter().copied().flatten().copied().collect();
    table_of_some(keys, &all, inner)
}

fn described(key: &Key, inner: &[(&str, Value)]) -> Value {
    let own = inner.iter().find(|(name, _)| *name == key.name).map(|(_, schema)| schema.clone());
    let mut schema = own.unwrap_or_else(|| of_takes(key.takes));
    if let Value::Object(map) = &mut schema {
        map.insert("description".into(), json!(key.help));
    }
    schema
}

fn of_takes(takes: Takes) -> Value {
    match takes {
        Takes::Text | Takes::Markdown => json!({ "type": "string" }),
        Takes::Number => json!({ "type": "number" }),
        Takes::Positive | Takes::PositiveOrInfinite => {
            json!({ "type": "number", "minimum": 0, "not": { "enum": [0] } })
        }
        Takes::NotNegative => json!({ "type": "number", "minimum": 0 }),
        Takes::Probability => {
            json!({ "type": "number", "minimum": 0, "maximum": 1, "not": { "enum": [0, 1] } })
        }
        Takes::Share => json!({ "type": "number", "minimum": 0, "maximum": 1, "not": { "enum": [0] } }),
        Takes::Count => json!({ "type": "integer", "minimum": 1 }),
        Takes::Period => json!({ "type": ["integer", "string"] }),
        // Editors hand a TOML date on as text.
        Takes::Date => json!({ "type": "string" }),
        Takes::Flag => json!({ "type": "boolean" }),
        Takes::NumberOrLimit => json!({ "type": ["number", "string"] }),
        Takes::OneOf(choices) => json!({ "enum": choices }),
        Takes::TextList => json!({ "type": ["array", "string"], "items": { "type": "string" } }),
        Takes::NumberList => json!({ "type": "array", "items": { "type": "number" } }),
        Takes::Table => json!({ "type": "object" }),
        Takes::Tables => json!({ "type": "array", "items": { "type": "object" } }),
        Takes::Other(_) => json!({}),
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::spec::table::{Kind, Value as Written};

    /// Whether a value as written is what the schema allows, for the words of a schema used here.
    fn allows(schema: &Value, value: &Written) -> Result<(), String> {
        if let Some(ways) = schema.get("anyOf").and_then(Value::as_array) {
            let fits = ways.iter().any(|way| allows(way, value).is_ok());
            return if fits { Ok(()) } else { Err(format!("{} fits no way", value.in_words())) };
        }
        let kind = match &value.kind {
            Kind::Text(_) | Kind::Date(_) => "string",
            Kind::Number { whole: Some(_), .. } => "integer",
            Kind::Number { .. } => "number",
            Kind::Flag(_) => "boolean",
            Kind::List(_) => "array",
            Kind::Table(_) => "object",
        };
        let known = match schema.get("type") {
            Some(Value::String(one)) => vec![one.as_str()],
            Some(Value::Array(some)) => some.iter().filter_map(Value::as_str).collect(),
            _ => vec![kind],
        };
        let fits = known.contains(&kind) || (kind == "integer" && known.contains(&"number"));
        if !fits {
            return Err(format!("{} where {known:?} is wanted", value.in_words()));
        }
        if let (Some(choices), Kind::Text(text)) = (schema.get("enum").and_then(Value::as_array), &value.kind)
            && !choices.contains(&json!(text))
        {
            return Err(format!("{text} is none of {choices:?}"));
        }
        match &value.kind {
            Kind::List(items) => items
                .iter()
                .try_for_each(|item| schema.get("items").map_or(Ok(()), |inner| allows(inner, item))),
            Kind::Table(table) => table.entries.iter().try_for_each(|entry| {
                let known = schema.get("properties").and_then(|known| known.get(&entry.key));
                match known.or(schema.get("additionalProperties")) {
                    Some(Value::Bool(false)) => Err(format!("{} is not known", entry.key)),
                    Some(inner) => allows(inner, &entry.value).map_err(|why| format!("{}: {why}", entry.key)),
                    None => Ok(()),
                }
            }),
            _ => Ok(()),
        }
    }

    fn whole(bytes: &[u8]) -> Written {
        let root = crate::spec::read(bytes, "s.toml").unwrap().root;
        Written { span: root.span.clone(), kind: Kind::Table(root) }
    }

    #[test]
    fn every_example_is_what_the_schema_allows() {
        let schema = schema(&Inner::default());
        let folder = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("specs");
        let mut count = 0;
        for entry in std::fs::read_dir(folder).unwrap() {
            let path = entry.unwrap().path();
            if path.extension().is_some_and(|ending| ending == "toml") {
                let why = allows(&schema, &whole(&std::fs::read(&path).unwrap()));
                assert_eq!(why, Ok(()), "{}", path.display());
                count += 1;
            }
        }
        assert!(count > 50, "only {count} specs were found");
    }

    #[test]
    fn the_schema_refuses_what_the_program_refuses() {
        let schema = schema(&Inner::default());
        for wrong in [
            "[review]\ntitel = \"a\"\n",
            "[review]\nstatus = \"finel\"\n",
            "[quantity]\nname = 3\n",
            "lmit = 1\n",
        ] {
            assert!(allows(&schema, &whole(wrong.as_bytes())).is_err(), "{wrong}");
        }
    }

    #[test]
    fn a_page_names_every_key() {
        let page = page("[review]", &[of::REVIEW]);
        assert!(of::REVIEW.iter().all(|key| page.contains(key.name) && page.contains(key.help)), "{page}");
    }
}
