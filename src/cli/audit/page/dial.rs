//! A candidate's orbit as a dial: phase goes round, time goes outwards.

use std::f64::consts::TAU;

use maud::{Markup, html};

use crate::audit::CandidateAudit;
use crate::page::{px, svg_text};
use crate::score::CreditedVisit;

const SIZE: f64 = 240.0;
const CENTRE: (f64, f64) = (120.0, 122.0);
/// Radius of the first visit, and of the last.
const INNER: f64 = 30.0;
const OUTER: f64 = 92.0;
/// Half the angle of a visit's stroke, turns: it can be seen even where the phase is exact.
const LEAST_HALF_TURN: f64 = 0.006;
/// A phase known no better than this is drawn all round.
const MOST_HALF_TURN: f64 = 0.499;

/// The dial of one candidate; its visits in the order of its phases.
pub fn of(candidate: &CandidateAudit, visits: &[CreditedVisit]) -> Markup {
    let title = format!(
        "Phases of {} visits at {:.4} days; the widest gap is {:.0} % of the orbit",
        visits.len(),
        candidate.period_d,
        100.0 * candidate.coverage.largest_gap
    );
    let (first, last) = (visits.first(), visits.last());
    let span_ms = match (first, last) {
        (Some(first), Some(last)) => (last.mid - first.mid).max(1) as f64,
        _ => 1.0,
    };
    let radius = |visit: &CreditedVisit| {
        let since = first.map_or(0, |first| visit.mid - first.mid) as f64;
        INNER + (OUTER - INNER) * since / span_ms
    };
    html! {
        svg class="plot dial" viewBox=(format!("0 0 {SIZE} {SIZE}")) role="img" aria-label=(title) {
            title { (title) }
            g class="grid" {
                @for turn in [0.0, 0.25, 0.5, 0.75] {
                    @let (from, to) = (at(turn, INNER - 12.0), at(turn, OUTER + 6.0));
                    path d=(format!("M{} {}L{} {}", px(from.0), px(from.1), px(to.0), px(to.1))) {}
                }
            }
            g class="axis" {
                @for ring in [INNER - 6.0, OUTER + 6.0] {
                    circle class="ring" cx=(px(CENTRE.0)) cy=(px(CENTRE.1)) r=(px(ring)) {}
                }
            }
            (gap(candidate))
            @for (phase, visit) in candidate.coverage.phases.iter().zip(visits) {
                (stroke(phase.value, phase.error, radius(visit)))
            }
            (svg_text((CENTRE.0, 15.0), "middle", "", "0 (conjunction)"))
            (svg_text((CENTRE.0 + OUTER + 10.0, CENTRE.1 + 4.0), "start", "", "¼"))
            (svg_text((CENTRE.0, SIZE - 8.0), "middle", "", "½"))
            (svg_text((CENTRE.0 - OUTER - 10.0, CENTRE.1 + 4.0), "end", "", "¾"))
            (svg_text((CENTRE.0, CENTRE.1 + 4.0), "middle", "strong", &visits.len().to_string()))
        }
    }
}

/// A place on the dial: phase 0 on top, clockwise.
fn at(turn: f64, radius: f64) -> (f64, f64) {
    let (sin, cos) = (TAU * turn).sin_cos();
    (CENTRE.0 + radius * sin, CENTRE.1 - radius * cos)
}

/// A visit: an arc as wide as the error of its phase on both sides.
fn stroke(phase: f64, error: f64, radius: f64) -> Markup {
    let half = error.clamp(LEAST_HALF_TURN, MOST_HALF_TURN);
    let unsure = error > LEAST_HALF_TURN;
    let class = if unsure { "bar tone-2" } else { "bar tone-1" };
    html! {
        path class=(class) d=(arc(phase - half, phase + half, radius)) {}
        @if unsure {
            @let (x, y) = at(phase, radius);
            circle class="solid tone-2" cx=(px(x)) cy=(px(y)) r="1.8" {}
        }
    }
}

fn arc(from: f64, to: f64, radius: f64) -> String {
    let (a, b) = (at(from, radius), at(to, radius));
    let large = u8::from(to - from > 0.5);
    format!(
        "M{} {}A{r} {r} 0 {large} 1 {} {}",
        px(a.0),
        px(a.1),
        px(b.0),
        px(b.1),
        r = px(radius)
    )
}

/// The widest gap, as a band outside the ring.
fn gap(candidate: &CandidateAudit) -> Markup {
    let mut phases: Vec<f64> = candidate.coverage.phases.iter().map(|p| p.value).collect();
    phases.sort_by(f64::total_cmp);
    let next = |index: usize| {
        phases
            .get(index + 1)
            .map_or_else(|| phases[0] + 1.0, |p| *p)
    };
    let widest = (0..phases.len())
        .map(|index| (phases[index], next(index)))
        .max_by(|a, b| (a.1 - a.0).total_cmp(&(b.1 - b.0)));
    html! {
        @if let Some((from, to)) = widest.filter(|(from, to)| to - from < 0.999) {
            path class="gap" d=(arc(from, to, OUTER + 6.0)) {}
        }
    }
}
