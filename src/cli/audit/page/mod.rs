//! The audit as a page with pictures.

mod calendar;
mod dial;
mod overview;
mod star;

use maud::{Markup, html};

use crate::audit::{OwedCause, SurveyAudit};
use crate::catalogue::Survey;
use crate::cli::audit::text::nights;
use crate::page::{self, Fill};

/// Up to so many stars, each one's pictures are open from the start.
const OPEN_STARS: usize = 3;

/// The whole page.
pub fn page_of(survey: &Survey, audit: &SurveyAudit) -> String {
    let title = format!("{}: audit", survey.name);
    page::document(&title, &body(survey, audit))
}

fn body(survey: &Survey, audit: &SurveyAudit) -> Markup {
    let open = audit.stars.len() <= OPEN_STARS;
    html! {
        h1 { (survey.name) ": audit" }
        p class="soft" {
            (nights(audit)) ". " (survey.site.name) "."
        }
        (overview::of(survey, audit))
        h2 { "Star by star" }
        p {
            "Errors of K count each visit's own velocity error alone; jitter and floor are not added. \
             They are Cramér–Rao bounds: no fit of these visits does better."
        }
        (page::legend(&CAUSES))
        @for (row, (star, _)) in audit.stars.iter().enumerate() {
            (star::of(&survey.targets[*star], audit, row, open))
        }
    }
}

/// What the hatchings of nights mean.
const CAUSES: [(Fill, &str); 8] = [
    (Fill::Plain, "visited"),
    (Fill::Rising, "weather"),
    (Fill::Crossed, "instrument"),
    (Fill::Level, "outbid"),
    (Fill::Upright, "geometry"),
    (Fill::Dotted, "moon"),
    (Fill::Falling, "operator"),
    (Fill::Faint, "not recorded, not told, or not due"),
];

/// How a cause is filled in.
const fn fill_of(cause: OwedCause) -> Fill {
    match cause {
        OwedCause::Weather => Fill::Rising,
        OwedCause::Instrument => Fill::Crossed,
        OwedCause::Outbid => Fill::Level,
        OwedCause::Geometry => Fill::Upright,
        OwedCause::Moon => Fill::Dotted,
        OwedCause::Operator => Fill::Falling,
        OwedCause::Other | OwedCause::Unrecorded | OwedCause::NotDue => Fill::Faint,
    }
}
