//! The parsed file as a plain tree in which every value knows its line and how it was typed.

use std::ops::Range;
use std::path::{Path, PathBuf};

use toml_edit::{Document, Item, Table, TableLike, Value};

use super::problem::Problem;

/// How much of a value is repeated in a message.
const SHOWN_CHARS: usize = 48;

/// A settings file that is correct TOML.
#[derive(Clone, Debug)]
pub(super) struct Source {
    file: PathBuf,
    pub(super) root: Node,
}

/// One value of the file.
#[derive(Clone, Debug)]
pub(super) struct Node {
    /// The line of its key or header, from 1.
    pub(super) line: usize,
    /// How it was typed, shortened to one line; `None` for a table with a header of its own.
    pub(super) came: Option<String>,
    pub(super) kind: Kind,
}

#[derive(Clone, Debug)]
pub(super) enum Kind {
    Table(Vec<(String, Node)>),
    List(Vec<Node>),
    Text(String),
    Whole(i64),
    Real(f64),
    Flag,
    Date,
}

impl Source {
    /// Reads TOML; a syntax error is one problem with its line.
    pub(super) fn parse(file: &Path, text: &str) -> Result<Self, Problem> {
        let document = Document::parse(text).map_err(|error| Problem {
            file: file.to_owned(),
            line: line_at(text, error.span().map_or(text.len(), |span| span.start)),
            key: String::new(),
            came: None,
            message: format!("not TOML: {}", one_line(error.message())),
        })?;
        let root = Node {
            line: 1,
            came: None,
            kind: Text(text).table(document.as_table(), 1),
        };
        Ok(Self {
            file: file.to_owned(),
            root,
        })
    }

    pub(super) fn file(&self) -> &Path {
        &self.file
    }

    /// A problem at `key`; when nothing stands there, at the nearest table around it.
    pub(super) fn problem(&self, key: &str, message: impl Into<String>) -> Problem {
        let (node, found) = self.find(key);
        Problem {
            file: self.file.clone(),
            line: node.line,
            key: key.to_owned(),
            came: node.came.clone().filter(|_| found),
            message: message.into(),
        }
    }

    fn find(&self, key: &str) -> (&Node, bool) {
        let mut node = &self.root;
        for step in key.split(['.', '[']) {
            let next = match &node.kind {
                Kind::Table(entries) => entries.iter().find(|(name, _)| name == step),
                Kind::List(items) => {
                    let index = step.trim_end_matches(']').parse::<usize>();
                    match index.ok().and_then(|index| items.get(index)) {
                        Some(item) => {
                            node = item;
                            continue;
                        }
                        None => None,
                    }
                }
                _ => None,
            };
            match next {
                Some((_, child)) => node = child,
                None => return (node, false),
            }
        }
        (node, true)
    }
}

/// The text while the tree is built from spans into it.
#[derive(Clone, Copy)]
struct Text<'a>(&'a str);

impl Text<'_> {
    fn table(self, table: &dyn TableLike, line: usize) -> Kind {
        let entries = table.iter().map(|(name, item)| {
            let key = table.get_key_value(name).and_then(|(key, _)| key.span());
            let line = key.map_or(line, |span| line_at(self.0, span.start));
            (name.to_owned(), self.item(item, line))
        });
        Kind::Table(entries.collect())
    }

    fn item(self, item: &Item, line: usize) -> Node {
        match item {
            Item::Value(value) => self.value(value, line),
            Item::Table(table) => self.header(table, line),
            Item::ArrayOfTables(tables) => Node {
                line,
                came: None,
                kind: Kind::List(tables.iter().map(|each| self.header(each, line)).collect()),
            },
            Item::None => Node {
                line,
                came: None,
                kind: Kind::Table(Vec::new()),
            },
        }
    }

    fn header(self, table: &Table, line: usize) -> Node {
        let line = self.line(table.span(), line);
        Node {
            line,
            came: None,
            kind: self.table(table, line),
        }
    }

    fn value(self, value: &Value, line: usize) -> Node {
        let kind = match value {
            Value::String(text) => Kind::Text(text.value().clone()),
            Value::Integer(number) => Kind::Whole(*number.value()),
            Value::Float(number) => Kind::Real(*number.value()),
            Value::Boolean(_) => Kind::Flag,
            Value::Datetime(_) => Kind::Date,
            Value::Array(items) => Kind::List(
                items
                    .iter()
                    .map(|item| self.value(item, self.line(item.span(), line)))
                    .collect(),
            ),
            Value::InlineTable(table) => self.table(table, line),
        };
        let typed = value.span().and_then(|span| self.0.get(span));
        Node {
            line,
            came: typed.map(one_line),
            kind,
        }
    }

    fn line(self, span: Option<Range<usize>>, otherwise: usize) -> usize {
        span.map_or(otherwise, |span| line_at(self.0, span.start))
    }
}

/// The line of the byte at `offset`, from 1.
pub(super) fn line_at(text: &str, offset: usize) -> usize {
    let before = &text.as_bytes()[..offset.min(text.len())];
    1 + before.iter().filter(|&&byte| byte == b'\n').count()
}

/// `typed` on one line and not too long, with nothing that a terminal would obey.
pub(super) fn one_line(typed: &str) -> String {
    let words: Vec<_> = typed.split_whitespace().collect();
    let line = words.join(" ");
    let mut shown: String = line
        .chars()
        .take(SHOWN_CHARS)
        .map(|letter| if letter.is_control() { '?' } else { letter })
        .collect();
    if line.chars().count() > SHOWN_CHARS {
        shown.push_str("...");
    }
    shown
}
