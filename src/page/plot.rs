//! A picture with axes.

use maud::{Markup, html};

use super::mark::{px, svg_text};
use super::scale::Scale;

/// Room for the names of the axes and their values: left, right, above, below.
const MARGIN: (f64, f64, f64, f64) = (46.0, 12.0, 22.0, 38.0);

/// A picture with a horizontal and a vertical axis. Make the scales from [`Plot::across`] and
/// [`Plot::upwards`], then draw marks with them and put them into [`Plot::svg`].
#[derive(Clone, Debug)]
pub struct Plot<'a> {
    /// Width and height of the whole, units.
    pub size: (f64, f64),
    /// What the picture shows, for those who cannot see it.
    pub title: &'a str,
    /// Name of the horizontal axis, with its unit.
    pub x_name: &'a str,
    /// Name of the vertical axis, with its unit; it stands above the axis.
    pub y_name: &'a str,
}

/// A line across the picture at a value worth marking, with its name.
#[derive(Clone, Debug)]
pub struct Rule<'a> {
    /// Where along the horizontal axis, units.
    pub at: f64,
    /// Its name.
    pub name: &'a str,
}

impl Plot<'_> {
    /// The horizontal range, left to right, units.
    pub fn across(&self) -> (f64, f64) {
        (MARGIN.0, self.size.0 - MARGIN.1)
    }

    /// The vertical range, bottom to top, units.
    pub fn upwards(&self) -> (f64, f64) {
        (self.size.1 - MARGIN.3, MARGIN.2)
    }

    /// The whole picture: grid, axes and the marks.
    pub fn svg(&self, x: &Scale, y: &Scale, rules: &[Rule<'_>], marks: &Markup) -> Markup {
        let (width, height) = self.size;
        let (left, right) = self.across();
        let (bottom, top) = self.upwards();
        let x_ticks = x.ticks(((right - left) / 58.0) as usize);
        let y_ticks = y.ticks(((bottom - top) / 34.0) as usize);
        html! {
            svg class="plot" viewBox=(format!("0 0 {} {}", px(width), px(height))) role="img"
                aria-label=(self.title) {
                title { (self.title) }
                g class="grid" {
                    @for tick in &y_ticks {
                        path d=(format!("M{} {}H{}", px(left), px(tick.at), px(right))) {}
                    }
                }
                g class="axis" {
                    path d=(format!("M{} {}V{}H{}", px(left), px(top), px(bottom), px(right))) {}
                    @for tick in &x_ticks {
                        path d=(format!("M{} {}v4", px(tick.at), px(bottom))) {}
                        (svg_text((tick.at, bottom + 15.0), "middle", "", &tick.label))
                    }
                    @for tick in &y_ticks {
                        (svg_text((left - 5.0, tick.at + 3.5), "end", "", &tick.label))
                    }
                    (svg_text((right, bottom + 31.0), "end", "name", self.x_name))
                    (svg_text((4.0, top - 9.0), "start", "name", self.y_name))
                }
                @for rule in rules { (ruled(rule, (left, right), (bottom, top))) }
                (marks)
            }
        }
    }
}

/// A dashed upright line with its name on the side that has more room.
fn ruled(rule: &Rule<'_>, (left, right): (f64, f64), (bottom, top): (f64, f64)) -> Markup {
    let (offset, anchor) = if rule.at > (left + right) / 2.0 {
        (-4.0, "end")
    } else {
        (4.0, "start")
    };
    html! {
        path class="rule" d=(format!("M{} {}V{}", px(rule.at), px(bottom), px(top))) {}
        (svg_text((rule.at + offset, top + 9.0), anchor, "note", rule.name))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_picture_names_its_axes_and_itself() {
        let plot = Plot {
            size: (360.0, 220.0),
            title: "mass & period",
            x_name: "period, days",
            y_name: "K, m/s",
        };
        let x = Scale::log((1.0, 100.0), plot.across());
        let y = Scale::linear((0.0, 4.0), plot.upwards());
        let rule = Rule {
            at: x.at(10.0),
            name: "Earth-like",
        };
        let drawn = plot.svg(&x, &y, &[rule], &html! {}).into_string();
        for text in [
            "mass &amp; period",
            "period, days",
            "K, m/s",
            ">100<",
            ">Earth-like<",
        ] {
            assert!(drawn.contains(text), "{text}: {drawn}");
        }
        assert!(!drawn.contains("NaN"));
    }
}
