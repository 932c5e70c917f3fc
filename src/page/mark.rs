//! Marks of a picture: markers, lines, hatched areas, text.

use std::fmt::Write;

use maud::{Markup, html};

/// A coordinate in the units of a picture, to a tenth: finer is lost on every screen.
pub fn px(value: f64) -> String {
    if !value.is_finite() {
        return "0".to_owned();
    }
    let text = format!("{value:.1}");
    match text.strip_suffix(".0") {
        Some("-0") => "0".to_owned(),
        Some(whole) => whole.to_owned(),
        None => text,
    }
}

/// Shapes of markers, to tell kinds apart without colour.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Shape {
    /// A filled disc.
    Disc,
    /// A ring.
    Ring,
    /// A filled square.
    Square,
    /// A square on its corner.
    Diamond,
    /// A triangle that points up.
    Triangle,
    /// Two strokes across.
    Cross,
}

/// A marker about `radius` around a point. `class` gives its colour: `ink`, `soft`, `tone-1` to
/// `tone-6`. `title` shows where a pointer rests.
pub fn marker(shape: Shape, at: (f64, f64), radius: f64, class: &str, title: &str) -> Markup {
    let (x, y) = at;
    let outline = match shape {
        Shape::Disc | Shape::Ring => String::new(),
        Shape::Square => {
            let r = 0.86 * radius;
            closed(&[
                (x - r, y - r),
                (x + r, y - r),
                (x + r, y + r),
                (x - r, y + r),
            ])
        }
        Shape::Diamond => {
            let r = 1.25 * radius;
            closed(&[(x, y - r), (x + r, y), (x, y + r), (x - r, y)])
        }
        Shape::Triangle => {
            let r = 1.2 * radius;
            closed(&[
                (x, y - r),
                (x + 0.9 * r, y + 0.7 * r),
                (x - 0.9 * r, y + 0.7 * r),
            ])
        }
        Shape::Cross => {
            let arm = |dx: f64, dy: f64| {
                format!(
                    "M{} {}L{} {}",
                    px(x - dx),
                    px(y - dy),
                    px(x + dx),
                    px(y + dy)
                )
            };
            arm(radius, radius) + &arm(radius, -radius)
        }
    };
    let class = match shape {
        Shape::Ring | Shape::Cross => format!("hollow {class}"),
        _ => format!("solid {class}"),
    };
    let title = html! { @if !title.is_empty() { title { (title) } } };
    html! {
        @match shape {
            Shape::Disc | Shape::Ring => {
                circle class=(class) cx=(px(x)) cy=(px(y)) r=(px(radius)) { (title) }
            }
            _ => path class=(class) d=(outline) { (title) }
        }
    }
}

fn closed(corners: &[(f64, f64)]) -> String {
    format!("{}Z", outline(corners))
}

/// Path data through points.
fn outline(points: &[(f64, f64)]) -> String {
    let mut d = String::new();
    for (index, (x, y)) in points.iter().enumerate() {
        let command = if index == 0 { 'M' } else { 'L' };
        // Writing to a string does not fail.
        let _ = write!(d, "{command}{} {}", px(*x), px(*y));
    }
    d
}

/// A line through points, `class` among `line-1` to `line-4` (which differ in dashes too).
pub fn line(points: &[(f64, f64)], class: &str) -> Markup {
    html! { path class=(format!("line {class}")) d=(outline(points)) {} }
}

/// Text at a point; `anchor` is `start`, `middle` or `end`, `class` may be empty.
pub fn svg_text(at: (f64, f64), anchor: &str, class: &str, text: &str) -> Markup {
    html! {
        text x=(px(at.0)) y=(px(at.1)) text-anchor=(anchor)
            class=[(!class.is_empty()).then_some(class)] { (text) }
    }
}

/// Ways to fill an area, each with a tone and a hatching of its own. What they mean is the
/// picture's.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Fill {
    /// Plain, the strongest.
    Plain,
    /// Strokes that rise.
    Rising,
    /// Strokes that fall.
    Falling,
    /// Level strokes.
    Level,
    /// Upright strokes.
    Upright,
    /// Dots.
    Dotted,
    /// Strokes both ways.
    Crossed,
    /// A faint plain tone, for what is of no account.
    Faint,
}

/// Every fill.
pub const FILLS: [Fill; 8] = [
    Fill::Plain,
    Fill::Rising,
    Fill::Falling,
    Fill::Level,
    Fill::Upright,
    Fill::Dotted,
    Fill::Crossed,
    Fill::Faint,
];

impl Fill {
    /// Its class in the style sheet.
    pub const fn class(self) -> &'static str {
        match self {
            Fill::Plain => "fill-plain",
            Fill::Rising => "fill-rising",
            Fill::Falling => "fill-falling",
            Fill::Level => "fill-level",
            Fill::Upright => "fill-upright",
            Fill::Dotted => "fill-dotted",
            Fill::Crossed => "fill-crossed",
            Fill::Faint => "fill-faint",
        }
    }

    /// Strokes of its hatching on a tile of 6 by 6, and whether they are dots.
    const fn strokes(self) -> Option<&'static str> {
        match self {
            Fill::Plain | Fill::Faint => None,
            Fill::Rising => Some("M-1 7L7 -1M-1 1L1 -1M5 7L7 5"),
            Fill::Falling => Some("M-1 -1L7 7M5 -1L7 1M-1 5L1 7"),
            Fill::Level => Some("M0 3H6"),
            Fill::Upright => Some("M3 0V6"),
            Fill::Dotted => Some("M1.5 1.5h.01M4.5 4.5h.01"),
            Fill::Crossed => Some("M0 3H6M3 0V6"),
        }
    }
}

/// A hatched rectangle from a corner, of a size.
pub fn hatch(fill: Fill, corner: (f64, f64), size: (f64, f64)) -> Markup {
    let (x, y, width, height) = (
        px(corner.0),
        px(corner.1),
        px(size.0.max(0.0)),
        px(size.1.max(0.0)),
    );
    html! {
        rect class=(format!("area {}", fill.class())) x=(x) y=(y) width=(width) height=(height) {}
        @if fill.strokes().is_some() {
            rect x=(x) y=(y) width=(width) height=(height)
                fill=(format!("url(#{})", fill.class())) {}
        }
    }
}

/// The patterns behind [`hatch`]. Every page carries them once.
pub fn hatchings() -> Markup {
    html! {
        svg class="patterns" aria-hidden="true" focusable="false" {
            defs {
                @for fill in FILLS {
                    @if let Some(strokes) = fill.strokes() {
                        pattern id=(fill.class()) width="6" height="6" patternUnits="userSpaceOnUse" {
                            path class="strokes" d=(strokes) {}
                        }
                    }
                }
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn coordinates_are_short_and_always_numbers() {
        for (value, text) in [
            (12.04, "12"),
            (12.06, "12.1"),
            (-0.01, "0"),
            (-3.5, "-3.5"),
            (f64::NAN, "0"),
            (f64::INFINITY, "0"),
        ] {
            assert_eq!(px(value), text);
        }
    }

    #[test]
    fn marks_are_escaped_and_told_apart_without_colour() {
        let shapes = [
            Shape::Disc,
            Shape::Ring,
            Shape::Square,
            Shape::Diamond,
            Shape::Triangle,
            Shape::Cross,
        ];
        let drawn: std::collections::BTreeSet<String> = shapes
            .iter()
            .map(|shape| marker(*shape, (5.0, 5.0), 3.0, "ink", "<&>").into_string())
            .collect();
        assert_eq!(drawn.len(), shapes.len());
        assert!(
            drawn
                .iter()
                .all(|mark| mark.contains("<title>&lt;&amp;&gt;</title>"))
        );
        let strokes: Vec<_> = FILLS.iter().filter_map(|fill| fill.strokes()).collect();
        let different: std::collections::BTreeSet<_> = strokes.iter().collect();
        assert_eq!(different.len(), strokes.len());
    }

    #[test]
    fn a_line_goes_through_its_points() {
        let drawn = line(&[(0.0, 1.0), (2.5, 3.0)], "line-1").into_string();
        assert!(drawn.contains("d=\"M0 1L2.5 3\""), "{drawn}");
    }
}
