//! Checks every key of a file against the schema and reports all that is wrong, not only the first.
//!
//! The schema knows five kinds of value: tables, lists, numbers, text and flags, plus words to choose from and tables
//! that are told apart by a word (`threshold`). A test makes sure that it has no others.

use serde_json::{Map, Value};

use super::problem::Problem;
use super::source::{Kind, Node, Source, one_line};

/// All problems of the file's keys by themselves.
pub(super) fn walk(source: &Source, schema: &Value) -> Vec<Problem> {
    let mut walk = Walk {
        source,
        schema,
        problems: Vec::new(),
    };
    walk.check("", &source.root, schema);
    walk.problems
}

struct Walk<'a> {
    source: &'a Source,
    schema: &'a Value,
    problems: Vec<Problem>,
}

impl<'a> Walk<'a> {
    fn check(&mut self, key: &str, node: &Node, rule: &'a Value) {
        let rule = resolve(self.schema, rule);
        if let Some(words) = words(rule) {
            let known = matches!(&node.kind, Kind::Text(word) if words.contains(&word.as_str()));
            return self.expect(known, key, node, rule);
        }
        match (rule_type(rule), &node.kind) {
            ("object", Kind::Table(entries)) => self.table(key, node, entries, rule),
            ("choice", Kind::Table(entries)) => self.choice(key, node, entries, rule),
            ("array", Kind::List(items)) => self.list(key, node, items, rule),
            ("number", Kind::Real(number)) => {
                self.expect(in_range(rule, *number), key, node, rule);
            }
            ("number" | "integer", Kind::Whole(number)) => {
                self.expect(in_range(rule, *number as f64), key, node, rule);
            }
            ("string", Kind::Text(text)) => {
                let chars = text.chars().count() as f64;
                let fits = within(rule, "minLength", "maxLength", chars);
                self.expect(fits, key, node, rule);
            }
            ("boolean", Kind::Flag) | ("const", _) => {}
            _ => self.expect(false, key, node, rule),
        }
    }

    fn table(&mut self, key: &str, node: &Node, entries: &[(String, Node)], rule: &'a Value) {
        let no_keys = Map::new();
        let known = rule["properties"].as_object().unwrap_or(&no_keys);
        for (name, child) in entries {
            let path = join(key, name);
            match rule["properties"].get(name) {
                Some(rule) => self.check(&path, child, rule),
                None => self.unknown(key, name, child, known),
            }
        }
        for name in required(rule) {
            if !entries.iter().any(|(entry, _)| entry == name) {
                let path = join(key, name);
                let expected = expected(self.schema, &path, &rule["properties"][name]);
                self.add(
                    &path,
                    node.line,
                    None,
                    format!("missing; expected {expected}"),
                );
            }
        }
    }

    /// Tables that are told apart by a word, such as `threshold` by its `method`.
    fn choice(&mut self, key: &str, node: &Node, entries: &[(String, Node)], rule: &'a Value) {
        let Some((tag, variants)) = variants(rule) else {
            return;
        };
        let chosen = entries.iter().find(|(name, _)| name == tag);
        let variant = match chosen.map(|(_, child)| &child.kind) {
            Some(Kind::Text(word)) => variants.iter().find(|(name, _)| name == word),
            _ => None,
        };
        match (variant, chosen) {
            (Some((_, rule)), _) => self.table(key, node, entries, rule),
            (None, chosen) => {
                let missing = if chosen.is_none() { "missing; " } else { "" };
                let names: Vec<_> = variants.iter().map(|(name, _)| *name).collect();
                let at = chosen.map_or(node, |(_, child)| child);
                let came = chosen.and_then(|(_, child)| child.came.clone());
                let message = format!("{missing}expected {}", one_of(&names));
                self.add(&join(key, tag), at.line, came, message);
            }
        }
    }

    fn list(&mut self, key: &str, node: &Node, items: &[Node], rule: &'a Value) {
        if !within(rule, "minItems", "maxItems", items.len() as f64) {
            return self.expect(false, key, node, rule);
        }
        for (index, item) in items.iter().enumerate() {
            self.check(&format!("{key}[{index}]"), item, &rule["items"]);
        }
    }

    fn unknown(&mut self, table: &str, name: &str, node: &Node, known: &Map<String, Value>) {
        let path = join(table, name);
        let near = nearest(name, known.keys()).map(|near| join(table, near));
        let message = match near.or_else(|| self.elsewhere(name)) {
            Some(near) => format!("no such key; did you mean {near}?"),
            None => {
                let names: Vec<_> = known.keys().map(String::as_str).collect();
                format!("no such key; expected {}", either(&names))
            }
        };
        self.add(&path, node.line, node.came.clone(), message);
    }

    /// The key of that very name in another table.
    fn elsewhere(&self, name: &str) -> Option<String> {
        let tables = self.schema["properties"].as_object()?;
        tables.iter().find_map(|(table, rule)| {
            let rule = resolve(self.schema, rule);
            let rule = resolve(self.schema, rule.get("items").unwrap_or(rule));
            rule["properties"].get(name)?;
            Some(join(table, name))
        })
    }

    fn expect(&mut self, fits: bool, key: &str, node: &Node, rule: &Value) {
        if fits {
            return;
        }
        let mut message = format!("expected {}", expected(self.schema, key, rule));
        if let Some(hint) = hint(node, rule_type(rule), key) {
            message.push_str("; ");
            message.push_str(&hint);
        }
        self.add(key, node.line, node.came.clone(), message);
    }

    fn add(&mut self, key: &str, line: usize, came: Option<String>, message: String) {
        self.problems.push(Problem {
            file: self.source.file().to_owned(),
            line,
            key: key.to_owned(),
            came,
            message,
        });
    }
}

/// What to change, where the way it was typed gives it away.
fn hint(node: &Node, wanted: &str, key: &str) -> Option<String> {
    match (&node.kind, wanted) {
        (Kind::Text(text), "number" | "integer") if text.trim().parse::<f64>().is_ok() => {
            Some("write it without quotes".to_owned())
        }
        (Kind::Text(text), "boolean") if text == "true" || text == "false" => {
            Some("write it without quotes".to_owned())
        }
        (Kind::Table(_), "array") => Some(format!("write [[{key}]] with double brackets")),
        _ => None,
    }
}

/// In words what `rule` asks for.
pub(super) fn expected(schema: &Value, key: &str, rule: &Value) -> String {
    let rule = resolve(schema, rule);
    if let Some(words) = words(rule) {
        return one_of(&words);
    }
    match rule_type(rule) {
        "number" => format!("a number {}", range(rule, key)),
        "integer" => format!("a whole number {}", range(rule, key)),
        "string" => format!(
            "text of {} to {} characters in quotes",
            rule["minLength"], rule["maxLength"]
        ),
        "boolean" => "true or false".to_owned(),
        "array" if rule["maxItems"] == 2 => {
            let item = resolve(schema, &rule["items"]);
            let kind = if item["type"] == "integer" {
                "whole numbers"
            } else {
                "numbers"
            };
            format!("[low, high], two {kind} {}", range(item, key))
        }
        "array" => format!("at least one table [[{key}]]"),
        "choice" => match variants(rule) {
            Some((tag, _)) => format!("a table with the key {tag}"),
            None => "a table".to_owned(),
        },
        _ => format!("a table with {}", all_of(&required(rule))),
    }
}

fn range(rule: &Value, key: &str) -> String {
    let unit = unit(key);
    let gap = if unit.is_empty() { "" } else { " " };
    format!(
        "from {} to {}{gap}{unit}",
        bound(&rule["minimum"]),
        bound(&rule["maximum"])
    )
}

fn bound(bound: &Value) -> String {
    bound
        .as_f64()
        .map_or_else(String::new, |number| number.to_string())
}

/// The unit that the key's name ends in.
fn unit(key: &str) -> &'static str {
    const UNITS: [(&str, &str); 8] = [
        ("mm_per_px", "mm/px"),
        ("_mm_s", "mm/s"),
        ("_mm2", "mm2"),
        ("_mm", "mm"),
        ("_px", "px"),
        ("_ms", "ms"),
        ("_percent", "%"),
        ("frames_per_s", "frames/s"),
    ];
    let name = match key.rsplit_once('[') {
        Some((list, index)) if index.ends_with(']') => list,
        _ => key,
    };
    let known = UNITS.iter().find(|(ending, _)| name.ends_with(ending));
    known.map_or("", |(_, unit)| unit)
}

fn resolve<'a>(schema: &'a Value, rule: &'a Value) -> &'a Value {
    let target = rule["$ref"]
        .as_str()
        .and_then(|link| link.strip_prefix('#'));
    target
        .and_then(|pointer| schema.pointer(pointer))
        .unwrap_or(rule)
}

/// `choice` for tables told apart by a word, `const` for that word, otherwise JSON Schema's own word.
fn rule_type(rule: &Value) -> &str {
    if rule.get("oneOf").is_some() {
        "choice"
    } else if rule.get("const").is_some() {
        "const"
    } else {
        rule["type"].as_str().unwrap_or("")
    }
}

/// The words to choose from, if `rule` is such a choice.
fn words(rule: &Value) -> Option<Vec<&str>> {
    let choices = rule["oneOf"].as_array()?;
    choices
        .iter()
        .map(|choice| choice["const"].as_str())
        .collect()
}

/// The key that tells the tables apart, and each table by its word.
fn variants(rule: &Value) -> Option<(&str, Vec<(&str, &Value)>)> {
    let choices = rule["oneOf"].as_array()?;
    let first = choices.first()?["properties"].as_object()?;
    let (tag, _) = first.iter().find(|(_, rule)| rule.get("const").is_some())?;
    let named = choices.iter().map(|choice| {
        let word = choice["properties"][tag]["const"].as_str()?;
        Some((word, choice))
    });
    Some((tag, named.collect::<Option<_>>()?))
}

fn required(rule: &Value) -> Vec<&str> {
    let names = rule["required"].as_array().map_or(&[][..], Vec::as_slice);
    names.iter().filter_map(Value::as_str).collect()
}

fn in_range(rule: &Value, number: f64) -> bool {
    number.is_finite() && within(rule, "minimum", "maximum", number)
}

fn within(rule: &Value, low: &str, high: &str, number: f64) -> bool {
    rule[low].as_f64().is_none_or(|low| number >= low)
        && rule[high].as_f64().is_none_or(|high| number <= high)
}

/// The name that was probably meant: at most a third of its letters differ.
fn nearest<'a>(name: &str, known: impl Iterator<Item = &'a String>) -> Option<&'a str> {
    let distance = |other: &str| strsim::damerau_levenshtein(name, other);
    let near = known.map(|other| (distance(other), other.as_str())).min()?;
    (near.0 <= (near.1.len() / 3).max(1)).then_some(near.1)
}

fn join(table: &str, name: &str) -> String {
    let name = one_line(name);
    if table.is_empty() {
        name
    } else {
        format!("{table}.{name}")
    }
}

fn one_of(words: &[&str]) -> String {
    let quoted: Vec<_> = words.iter().map(|word| format!("\"{word}\"")).collect();
    either(&quoted.iter().map(String::as_str).collect::<Vec<_>>())
}

fn either(names: &[&str]) -> String {
    listed(names, "or")
}

fn all_of(names: &[&str]) -> String {
    listed(names, "and")
}

fn listed(names: &[&str], last: &str) -> String {
    match names {
        [] => "nothing".to_owned(),
        [only] => (*only).to_owned(),
        [first @ .., end] => format!("{} {last} {end}", first.join(", ")),
    }
}
