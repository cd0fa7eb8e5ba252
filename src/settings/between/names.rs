//! Names that are given twice or lead nowhere.

use crate::settings::fields::{Outlet, Settings};

use super::Findings;

pub(super) fn check(settings: &Settings, found: &mut Findings) {
    let shapes = settings.shapes.iter().map(|shape| shape.name.clone());
    twice("shape", "name", "another name", shapes, found);
    let names = settings.outlets.iter().map(|outlet| outlet.name.clone());
    twice("outlet", "name", "another name", names, found);
    let coils = settings.outlets.iter().map(|outlet| outlet.coil);
    twice("outlet", "coil", "a coil of its own", coils, found);
    let reject = &settings.reject.outlet;
    leads_somewhere(settings, "reject.outlet", reject, found);
    for (index, shape) in settings.shapes.iter().enumerate() {
        let Some(outlet) = &shape.outlet else {
            continue;
        };
        let key = format!("shape[{index}].outlet");
        if outlet == reject {
            let why = format!("\"{reject}\" is where rejected parts go (reject.outlet)");
            found.add(
                key,
                "another outlet, or none to leave good parts on the belt",
                &why,
            );
        } else {
            leads_somewhere(settings, &key, outlet, found);
        }
    }
}

fn twice<T: PartialEq>(
    table: &str,
    name: &str,
    expected: &str,
    values: impl Iterator<Item = T>,
    found: &mut Findings,
) {
    let mut seen = Vec::new();
    for (index, value) in values.enumerate() {
        if let Some(first) = seen.iter().position(|earlier| *earlier == value) {
            let why = format!("{table}[{first}].{name} is the same");
            found.add(format!("{table}[{index}].{name}"), expected, &why);
        }
        seen.push(value);
    }
}

fn leads_somewhere(settings: &Settings, key: &str, outlet: &str, found: &mut Findings) {
    if settings.outlet_named(outlet).is_none() {
        let quoted = |outlet: &Outlet| format!("\"{}\"", outlet.name.escape_debug());
        let names: Vec<_> = settings.outlets.iter().map(quoted).collect();
        let expected = match names.as_slice() {
            [] => "an [[outlet]] of that name".to_owned(),
            names => format!("the name of an outlet, one of {}", names.join(", ")),
        };
        found.add(key, &expected, "there is no outlet of that name");
    }
}
