//! Changing values in a settings file without touching anything else in it.

use std::path::{Component, Path, PathBuf};

use thiserror::Error;
use toml_edit::{DocumentMut, Formatted, Item, Value};

/// Why a key cannot be set.
#[derive(Clone, Debug, Error, PartialEq)]
pub enum KeyError {
    /// Nothing stands there that could hold it.
    #[error(
        "{key}: {at} has no {step} in the settings file; expected a key such as picture.element_mm or shape[0].missing_mm"
    )]
    NoSuch {
        /// The whole key.
        key: String,
        /// What was found of it.
        at: String,
        /// What was not.
        step: String,
    },
    /// It is a whole table.
    #[error("{key}: is a table; expected a key with one value")]
    Table {
        /// The whole key.
        key: String,
    },
}

/// Sets `key` (such as `picture.threshold.level`, `shape[0].missing_mm` or `shape[0].area_mm2[1]`) to `typed`: a whole number,
/// a decimal one, or a word. Comments and everything else stay as they are.
///
/// # Errors
/// The key has no place in the file. A key that is only missing in its table is added.
pub fn set(document: &mut DocumentMut, key: &str, typed: &str) -> Result<(), KeyError> {
    let steps: Vec<String> = steps(key);
    let named = steps.iter().all(|step| !step.is_empty());
    let (last, way) = steps
        .split_last()
        .filter(|_| named)
        .ok_or_else(|| no_such(key, "", "name"))?;
    let mut item: &mut Item = document.as_item_mut();
    for (k, step) in way.iter().enumerate() {
        // A list of values ends the way: `area_mm2[1]`.
        if k + 1 == way.len()
            && let (Ok(_), Some(Value::Array(array))) = (
                last.parse::<usize>(),
                item.get_mut(step).and_then(Item::as_value_mut),
            )
        {
            return set_in_array(array, last, typed, key);
        }
        let found = match step.parse::<usize>() {
            Ok(index) => item.get_mut(index),
            Err(_) => item.get_mut(step.as_str()),
        };
        item = found.ok_or_else(|| no_such(key, &way[..k].join("."), step))?;
    }
    let Some(table) = item.as_table_like_mut() else {
        return Err(no_such(key, &way.join("."), last));
    };
    match table.get_mut(last) {
        Some(Item::Value(old)) => replace(old, typed),
        None => {
            table.insert(last, Item::Value(value(typed, None)));
        }
        Some(_) => {
            return Err(KeyError::Table {
                key: key.to_owned(),
            });
        }
    }
    Ok(())
}

/// What stands at `key`, as it is typed; `-` if nothing does.
pub fn value_at(document: &DocumentMut, key: &str) -> String {
    let mut item: Option<&Item> = Some(document.as_item());
    let steps = steps(key);
    for (k, step) in steps.iter().enumerate() {
        let index = step.parse::<usize>();
        if let (Ok(index), Some(Value::Array(array)), true) =
            (&index, item.and_then(Item::as_value), k + 1 == steps.len())
        {
            return array.get(*index).map_or_else(|| "-".to_owned(), typed);
        }
        item = match index {
            Ok(index) => item.and_then(|item| item.get(index)),
            Err(_) => item.and_then(|item| item.get(step.as_str())),
        };
    }
    item.and_then(Item::as_value)
        .map_or_else(|| "-".to_owned(), typed)
}

fn typed(value: &Value) -> String {
    match value {
        Value::String(text) => text.value().clone(),
        other => {
            let mut plain = other.clone();
            plain.decor_mut().clear();
            plain.to_string()
        }
    }
}

fn set_in_array(
    array: &mut toml_edit::Array,
    last: &str,
    typed: &str,
    key: &str,
) -> Result<(), KeyError> {
    let index = last.parse::<usize>().ok();
    let old = index.and_then(|index| array.get_mut(index));
    let old = old.ok_or_else(|| no_such(key, key.split('[').next().unwrap_or(key), last))?;
    replace(old, typed);
    Ok(())
}

fn no_such(key: &str, at: &str, step: &str) -> KeyError {
    KeyError::NoSuch {
        key: key.to_owned(),
        at: if at.is_empty() { "the top" } else { at }.to_owned(),
        step: step.to_owned(),
    }
}

fn steps(key: &str) -> Vec<String> {
    let steps = key.split(['.', '[']);
    steps
        .map(|step| step.trim_end_matches(']').to_owned())
        .collect()
}

/// A new value with the old one's comments and spaces around it.
fn replace(old: &mut Value, typed: &str) {
    let mut new = value(typed, Some(old));
    *new.decor_mut() = old.decor().clone();
    *old = new;
}

/// What was typed, as the kind of value that stood there before if it can be.
fn value(typed: &str, before: Option<&Value>) -> Value {
    let whole = typed.parse::<i64>().ok();
    let real = typed.parse::<f64>().ok().filter(|real| real.is_finite());
    match (before, whole, real) {
        (Some(Value::Float(_)), _, Some(real)) => Value::Float(Formatted::new(real)),
        (Some(Value::Integer(_)), None, Some(real)) if real.fract() == 0.0 => {
            Value::Integer(Formatted::new(real as i64))
        }
        (_, Some(whole), _) => Value::from(whole),
        (_, None, Some(real)) => Value::Float(Formatted::new(real)),
        _ => Value::from(typed),
    }
}

/// Lets the taught shapes, whose paths start at the folder `from`, be found from the folder `to`.
pub fn move_shapes(document: &mut DocumentMut, from: &Path, to: &Path) {
    let Some(shapes) = document
        .get_mut("shape")
        .and_then(Item::as_array_of_tables_mut)
    else {
        return;
    };
    for shape in shapes.iter_mut() {
        if let Some(Item::Value(old)) = shape.get_mut("file")
            && let Some(file) = old.as_str()
            && Path::new(file).is_relative()
        {
            let moved = relative(&from.join(file), to)
                .to_string_lossy()
                .into_owned();
            replace(old, &moved);
        }
    }
}

/// `file` as seen from `folder`; both start at the same place. Absolute if there is no such way.
fn relative(file: &Path, folder: &Path) -> PathBuf {
    let absolute = |path: &Path| std::path::absolute(path).map(|path| tidy(&path));
    let (Ok(file), Ok(folder)) = (absolute(file), absolute(folder)) else {
        return file.to_owned();
    };
    let (a, b): (Vec<_>, Vec<_>) = (file.components().collect(), folder.components().collect());
    let same = a.iter().zip(&b).take_while(|(a, b)| a == b).count();
    let up = b[same..].iter().map(|_| Component::ParentDir);
    up.chain(a[same..].iter().copied()).collect()
}

/// Without `.` and `..`.
fn tidy(path: &Path) -> PathBuf {
    let mut tidy = PathBuf::new();
    for component in path.components() {
        match component {
            Component::CurDir => {}
            Component::ParentDir => {
                tidy.pop();
            }
            other => tidy.push(other),
        }
    }
    tidy
}

#[cfg(test)]
mod tests {
    use super::*;

    const TEXT: &str = "\
# head
[picture]
element_mm = 45.0 # wide
threshold = { method = \"otsu\", floor = 30 } # per frame

[[shape]]
name = \"star\"
file = \"../shapes/star.toml\"
missing_mm = 2.0
area_mm2 = [500.0, 900.0] # both ends
";

    fn with(key: &str, typed: &str) -> Result<String, KeyError> {
        let mut document: DocumentMut = TEXT.parse().unwrap();
        set(&mut document, key, typed)?;
        Ok(document.to_string())
    }

    #[test]
    fn only_the_value_changes() {
        for (key, typed, from, to) in [
            (
                "picture.element_mm",
                "40",
                "element_mm = 45.0 # wide",
                "element_mm = 40.0 # wide",
            ),
            (
                "picture.threshold.floor",
                "25",
                "floor = 30 }",
                "floor = 25 }",
            ),
            (
                "shape[0].missing_mm",
                "1.75",
                "missing_mm = 2.0",
                "missing_mm = 1.75",
            ),
            (
                "shape[0].area_mm2[1]",
                "800.5",
                "[500.0, 900.0] #",
                "[500.0, 800.5] #",
            ),
            ("picture.threshold.method", "fixed", "\"otsu\"", "\"fixed\""),
        ] {
            assert_eq!(with(key, typed).unwrap(), TEXT.replace(from, to), "{key}");
        }
        let added = with("shape[0].branch_above_mm", "5").unwrap();
        assert!(added.contains("branch_above_mm = 5\n"), "{added}");
    }

    #[test]
    fn what_stands_there_can_be_read() {
        let document: DocumentMut = TEXT.parse().unwrap();
        for (key, typed) in [
            ("picture.element_mm", "45.0"),
            ("picture.threshold.method", "otsu"),
            ("shape[0].area_mm2[1]", "900.0"),
            ("shape[1].area_mm2[1]", "-"),
            ("picture.none", "-"),
        ] {
            assert_eq!(value_at(&document, key), typed, "{key}");
        }
    }

    #[test]
    fn keys_without_a_place_are_told() {
        for key in [
            "picturee.element_mm",
            "shape[3].missing_mm",
            "picture.element_mm.x",
            "",
            "shape[0].area_mm2[7]",
        ] {
            assert!(
                matches!(with(key, "1"), Err(KeyError::NoSuch { .. })),
                "{key}"
            );
        }
        assert!(matches!(with("picture", "1"), Err(KeyError::Table { .. })));
    }

    #[test]
    fn shapes_are_found_from_another_folder() {
        let mut document: DocumentMut = TEXT.parse().unwrap();
        move_shapes(&mut document, Path::new("a/config"), Path::new("b"));
        assert!(
            document
                .to_string()
                .contains("file = \"../a/shapes/star.toml\""),
            "{document}"
        );
    }
}
