//! Floor 1: pages for people that need nothing but themselves. HTML with one style sheet, light and
//! dark, for phone, desk and paper; pictures in SVG whose text is text.
//!
//! # Rules of a page
//!
//! - No script, no request, no `style` attribute: a strict content security policy lets it through.
//!   Looks come from the classes of the style sheet, places from SVG attributes.
//! - Colour is never the only cue. Kinds differ in shape ([`Shape`]), in hatching ([`hatch`]) or in
//!   dashes (`line-1` to `line-4`), and what they mean is written beside them ([`legend`]).
//! - A picture is drawn about 360 units wide, so that its text can be read on a phone; a wide one
//!   scrolls within its own box ([`wide_figure`]).

mod mark;
mod plot;
pub mod queue;
mod scale;

use maud::{DOCTYPE, Markup, PreEscaped, html};

pub use mark::{FILLS, Fill, Shape, hatch, hatchings, line, marker, px, svg_text};
pub use plot::{Plot, Rule};
pub use scale::{Scale, Tick};

/// The style sheet, for a server that hands it out by itself. The variables at its top are the
/// colours of both themes.
pub const STYLE: &str = include_str!("style.css");

/// A whole page that carries its style sheet within.
pub fn document(title: &str, body: &Markup) -> String {
    page(title, &html! { style { (PreEscaped(STYLE)) } }, body)
}

/// A whole page whose style sheet ([`STYLE`]) the server hands out at `style_href`, as a policy
/// without inline styles wants it. `refresh_s`: the browser loads it anew after so many seconds.
pub fn linked_document(
    title: &str,
    style_href: &str,
    refresh_s: Option<u32>,
    body: &Markup,
) -> String {
    let head = html! {
        link rel="stylesheet" href=(style_href);
        @if let Some(seconds) = refresh_s { meta http-equiv="refresh" content=(seconds); }
    };
    page(title, &head, body)
}

fn page(title: &str, head: &Markup, body: &Markup) -> String {
    let page = html! {
        (DOCTYPE)
        html lang="en" {
            head {
                meta charset="utf-8";
                meta name="viewport" content="width=device-width, initial-scale=1";
                meta name="color-scheme" content="light dark";
                meta name="generator" content="nightwright";
                title { (title) }
                (head)
            }
            body {
                (hatchings())
                main { (body) }
            }
        }
    };
    page.into_string()
}

/// A column of a [`table`].
#[derive(Clone, Copy, Debug)]
pub struct Column<'a> {
    /// Its heading.
    pub heading: &'a str,
    /// Numbers stand to the right.
    pub numeric: bool,
}

impl<'a> Column<'a> {
    /// Of words.
    pub const fn words(heading: &'a str) -> Self {
        Column {
            heading,
            numeric: false,
        }
    }

    /// Of numbers.
    pub const fn numbers(heading: &'a str) -> Self {
        Column {
            heading,
            numeric: true,
        }
    }
}

/// A table that scrolls within its own box where the page is too narrow. The first cell of a row is
/// its heading; a row with fewer cells than columns leaves the rest empty.
pub fn table(caption: &str, columns: &[Column<'_>], rows: &[Vec<Markup>]) -> Markup {
    let class = |index: usize| {
        let numeric = columns.get(index).is_some_and(|c| c.numeric);
        numeric.then_some("number")
    };
    html! {
        div class="tabled" {
            // Not a caption of HTML: that would be as wide as the table, and scroll away with it.
            p class="caption" { (caption) }
            div class="scroll" tabindex="0" {
                table aria-label=(caption) {
                    thead { tr {
                        @for (index, column) in columns.iter().enumerate() {
                            th scope="col" class=[class(index)] { (column.heading) }
                        }
                    } }
                    tbody {
                        @for row in rows {
                            tr {
                                @for (index, cell) in row.iter().enumerate() {
                                    @if index == 0 {
                                        th scope="row" class=[class(0)] { (cell) }
                                    } @else {
                                        td class=[class(index)] { (cell) }
                                    }
                                }
                            }
                        }
                    }
                }
            }
        }
    }
}

/// Named values beside each other: the few figures that a page begins with.
pub fn facts(pairs: &[(&str, Markup)]) -> Markup {
    html! {
        dl class="facts" {
            @for (name, value) in pairs {
                div { dt { (name) } dd { (value) } }
            }
        }
    }
}

/// A picture with its caption.
pub fn figure(caption: &Markup, picture: &Markup) -> Markup {
    html! { figure { (picture) figcaption { (caption) } } }
}

/// A picture wider than a phone, which scrolls within its own box.
pub fn wide_figure(caption: &Markup, picture: &Markup) -> Markup {
    html! {
        figure class="wide" {
            div class="scroll" tabindex="0" { (picture) }
            figcaption { (caption) }
        }
    }
}

/// Pictures beside each other where there is room.
pub fn gallery(figures: &[Markup]) -> Markup {
    html! { div class="gallery" { @for figure in figures { (figure) } } }
}

/// What the hatchings of a picture mean.
pub fn legend(entries: &[(Fill, &str)]) -> Markup {
    html! {
        ul class="legend" {
            @for (fill, meaning) in entries {
                li {
                    svg class="swatch" viewBox="0 0 14 14" aria-hidden="true" {
                        (hatch(*fill, (0.0, 0.0), (14.0, 14.0)))
                    }
                    (meaning)
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_page_needs_nothing_but_itself() {
        let body = html! { h1 { "Stars & " (1) } };
        let page = document("a <b>", &body);
        assert!(page.starts_with("<!DOCTYPE html>"), "{page}");
        assert!(page.contains("<title>a &lt;b&gt;</title>"));
        for outside in ["http://", "https://", "<script", "style=\"", "@import"] {
            assert!(!page.contains(outside), "{outside}");
        }
        assert!(page.contains("prefers-color-scheme: dark"));
        let linked = linked_document("a", "/style.css", Some(30), &body);
        assert!(linked.contains("<link rel=\"stylesheet\" href=\"/style.css\">"));
        assert!(!linked.contains("<style"), "{linked}");
    }

    #[test]
    fn a_tables_numbers_and_headings_are_told_apart() {
        let columns = [Column::words("star"), Column::numbers("visits")];
        let shown = table("all", &columns, &[vec![html! { "A" }, html! { (3) }]]).into_string();
        assert!(
            shown.contains("<th scope=\"row\">A</th><td class=\"number\">3</td>"),
            "{shown}"
        );
        assert!(shown.contains("<th scope=\"col\" class=\"number\">visits</th>"));
    }

    #[test]
    fn every_class_that_the_kit_uses_is_in_the_style_sheet() {
        for fill in FILLS {
            assert!(STYLE.contains(&format!(".{} ", fill.class())), "{fill:?}");
        }
        for class in [
            "number", "facts", "gallery", "legend", "swatch", "scroll", "wide", "long",
        ] {
            assert!(STYLE.contains(&format!(".{class}")), "{class}");
        }
    }
}
