//! The page around a report: one file, no script, nothing from outside.

use super::overlay::HATCH_PX;
use maud::{DOCTYPE, Markup, PreEscaped, html};

/// A part of the page.
pub struct Section {
    /// What links inside the page call it.
    pub id: &'static str,
    /// Its heading.
    pub title: &'static str,
    /// What stands in it.
    pub body: Markup,
}

/// The whole page.
pub fn page(title: &str, lead: &Markup, sections: &[Section]) -> String {
    let page = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                meta name="generator" content={ "beltwright " (env!("CARGO_PKG_VERSION")) };
                title { (title) }
                style { (PreEscaped(include_str!("page.css"))) }
            }
            body {
                (patterns())
                header { h1 { (title) } (lead) (contents(sections)) }
                main {
                    @for section in sections {
                        section id=(section.id) { h2 { (section.title) } (section.body) }
                    }
                }
                footer {
                    p {
                        "Written by beltwright " (env!("CARGO_PKG_VERSION"))
                        ". It sorts parts; it is not a safety function and must not be relied on to protect people."
                    }
                }
            }
        }
    };
    page.into_string()
}

fn contents(sections: &[Section]) -> Markup {
    html! {
        nav aria-label="Contents" {
            ul { @for section in sections { li { a href={ "#" (section.id) } { (section.title) } } } }
        }
    }
}

/// Hatchings that all drawings of the page share.
fn patterns() -> Markup {
    html! {
        svg.patterns width="0" height="0" aria-hidden="true" {
            defs {
                pattern #hatch-bad width="6" height="6" patternUnits="userSpaceOnUse" patternTransform="rotate(45)" {
                    rect.pattern-ground width="6" height="6" {}
                    rect.pattern-bad width="3" height="6" {}
                }
                @for px in HATCH_PX { (over_photo("missing", px, 45)) (over_photo("excess", px, -45)) }
                pattern #hatch-unseen width="7" height="7" patternUnits="userSpaceOnUse" patternTransform="rotate(-45)" {
                    rect.pattern-ground width="7" height="7" {}
                    rect.pattern-unseen width="2" height="7" {}
                }
            }
        }
    }
}

/// Lines over a photograph, `px` camera pixels wide, turned by `deg`.
fn over_photo(kind: &str, px: usize, deg: i32) -> Markup {
    let (step, height) = (4 * px, 4 * px);
    html! {
        pattern id={ (kind) "-" (px) } width=(step) height=(height) patternUnits="userSpaceOnUse"
            patternTransform={ "rotate(" (deg) ")" } {
            rect class={ "pattern-" (kind) } width=(2 * px) height=(height) {}
        }
    }
}

/// A table cell's worth: name and what stands beside it.
pub fn pairs(rows: &[(&str, String)]) -> Markup {
    html! {
        table.pairs {
            tbody { @for (name, what) in rows { tr { th scope="row" { (name) } td { (what) } } } }
        }
    }
}

/// A table with a heading for each column; the columns named in `numbers` stand to the right.
pub fn table(head: &[&str], numbers: &[usize], rows: &[Vec<String>]) -> Markup {
    let class = |column: usize| numbers.contains(&column).then_some("number");
    html! {
        div.wide {
            table.long[head.len() > 6] {
                thead { tr { @for (k, name) in head.iter().enumerate() { th scope="col" class=[class(k)] { (name) } } } }
                tbody {
                    @for row in rows {
                        tr { @for (k, cell) in row.iter().enumerate() { td class=[class(k)] { (cell) } } }
                    }
                }
            }
        }
    }
}

/// A drawing with a line below it. A wide one can be pushed sideways on a narrow screen.
pub fn figure(drawing: &Markup, caption: &str, wide: bool) -> Markup {
    html! {
        figure.chart.across[wide] { div.wide { (drawing) } figcaption { (caption) } }
    }
}
