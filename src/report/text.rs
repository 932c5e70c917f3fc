//! The report for a terminal or a mail.

use std::fmt::Write;

use super::Heading;
use super::words::{self, clock, from_to, hours, minutes, percent};
use crate::night::NightReport;
use crate::record::Visit;

/// Longest line.
const WIDTH: usize = 100;

/// A text that grows line by line.
#[derive(Default)]
struct Page(String);

impl Page {
    fn line(&mut self, text: &str) {
        self.0.push_str(text.trim_end());
        self.0.push('\n');
    }

    fn head(&mut self, text: &str) {
        self.0.push('\n');
        self.line(text);
    }

    /// Words after a lead, broken where a line would be too long; what follows stands under their
    /// beginning.
    fn words(&mut self, lead: &str, text: &str) {
        let indent = lead.chars().count();
        let mut line = lead.to_owned();
        for word in text
            .split_whitespace()
            .flat_map(|word| broken(word, WIDTH - indent))
        {
            let length = line.chars().count();
            if length > indent && length + 1 + word.chars().count() > WIDTH {
                self.line(&line);
                line = " ".repeat(indent);
            } else if length > indent {
                line.push(' ');
            }
            line.push_str(&word);
        }
        self.line(&line);
    }
}

/// A word in pieces of so many characters at most: an address, or a person's joke.
fn broken(word: &str, most: usize) -> Vec<String> {
    let characters: Vec<char> = word.chars().collect();
    characters
        .chunks(most.max(1))
        .map(|piece| piece.iter().collect())
        .collect()
}

pub(super) fn lines(report: &NightReport, heading: &Heading<'_>) -> String {
    let mut page = Page::default();
    page.words(
        "",
        &format!(
            "Night {}: {}, {}",
            report.bounds.night, heading.survey, heading.site
        ),
    );
    for warning in words::warnings(report) {
        page.line(warning);
    }
    match report.bounds.darkness {
        Some(dark) => page.line(&format!(
            "Darkness {} to {} UTC, {:.2} h",
            words::moment(dark.start),
            words::moment(dark.end),
            hours(dark.length_ms())
        )),
        None => page.line("There was no darkness."),
    }
    split(&mut page, report);
    visits(&mut page, report);
    holds(&mut page, report);
    revisions(&mut page, report);
    remarks(&mut page, report);
    weather(&mut page, report);
    page.0
}

fn split(page: &mut Page, report: &NightReport) {
    let summary = &report.summary;
    let darkness_ms = summary.darkness.map_or(0, |dark| dark.length_ms());
    if darkness_ms == 0 {
        return;
    }
    page.head("Where the darkness went");
    for (label, ms) in summary.split.parts().into_iter().filter(|(_, ms)| *ms > 0) {
        page.line(&format!(
            "  {label:<24} {:>8.1} min {:>5.1} %",
            minutes(ms),
            percent(ms, darkness_ms)
        ));
    }
}

fn visits(page: &mut Page, report: &NightReport) {
    let counts = &report.summary.visits;
    page.head(&format!(
        "Visits: {} done, {} short, {} lost, {} refused, {} unreported",
        counts.done, counts.short, counts.lost, counts.refused, counts.unreported
    ));
    if !report.visits.is_empty() {
        page.line(&format!(
            "  {:<16} {:<20} {:<13} {:<18} {:>8} {:>6} {:>7}",
            "visit", "subject", "UTC", "outcome", "exposed", "credit", "airmass"
        ));
    }
    for visit in &report.visits {
        page.line(&visit_line(visit));
        if !visit.note.is_empty() {
            page.words("      ", &visit.note);
        }
    }
    if let Some((visit, subject)) = &report.under_way {
        page.words("  ", &format!("{visit} {subject}: has not ended"));
    }
}

fn visit_line(visit: &Visit) -> String {
    let subject: String = visit.subject.as_str().chars().take(20).collect();
    let span = if visit.exposing.is_empty() {
        format!("{}–", clock(visit.began))
    } else {
        from_to(visit.exposing)
    };
    let airmass = visit
        .airmass
        .map_or_else(String::new, |x| format!("{x:.2}"));
    format!(
        "  {:<16} {subject:<20} {span:<13} {:<18} {:>6.0} s {:>6.2} {airmass:>7}",
        visit.id,
        words::outcome_words(visit.outcome),
        visit.exposed_s,
        visit.credit
    )
}

fn holds(page: &mut Page, report: &NightReport) {
    if report.holds.is_empty() {
        return;
    }
    page.head("Holds");
    for hold in &report.holds {
        let cause = words::hold(hold.cause);
        let length = minutes(hold.span.length_ms());
        let lead = format!("  {} {cause:<10} {length:>6.1} min  ", from_to(hold.span));
        page.words(&lead, &hold.detail);
    }
}

fn revisions(page: &mut Page, report: &NightReport) {
    if report.revisions.is_empty() {
        return;
    }
    page.head("Revisions of the queue");
    for revision in &report.revisions {
        let (_, cause) = words::plan_cause(&revision.cause);
        let bound = words::reached(revision)
            .map(|share| format!(", {share:.1} % of the bound"))
            .unwrap_or_default();
        let lead = format!("  {:>3} {} ", revision.number, clock(revision.made_at));
        let entries = match revision.entries {
            1 => "1 entry".to_owned(),
            entries => format!("{entries} entries"),
        };
        let worth = revision.value;
        page.words(
            &lead,
            &format!("{cause}: {entries} worth {worth:.2}{bound}"),
        );
    }
}

fn remarks(page: &mut Page, report: &NightReport) {
    if report.remarks.is_empty() {
        return;
    }
    page.head("What people did, and what befell the night keeper");
    for remark in &report.remarks {
        let by = remark.by.as_deref().unwrap_or("nightwright");
        page.words(
            &format!("  {} ", clock(remark.at)),
            &format!("{by}: {}", remark.text),
        );
    }
}

fn weather(page: &mut Page, report: &NightReport) {
    let courses = words::courses(report);
    if courses.is_empty() {
        return;
    }
    page.head("Weather as kept (least, median, greatest)");
    for course in courses {
        let (name, decimals) = words::quantity(course.quantity);
        let mut line = format!("  {name:<22}");
        for value in [course.least, course.median, course.greatest] {
            // Writing to a string does not fail.
            let _ = write!(line, " {value:>8.decimals$}");
        }
        page.line(&line);
    }
}
