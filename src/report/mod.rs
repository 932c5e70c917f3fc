//! Floor 4: the faces of a night's report, as text for a terminal or a mail, as a page that needs
//! nothing but itself, and as JSON for scripts. Pure: the same report gives the same bytes; writing
//! them down is the work of floors above.

mod html;
mod json;
mod picture;
#[cfg(test)]
mod tests;
mod text;
mod words;

use crate::night::NightReport;

/// Whose night it was.
#[derive(Clone, Copy, Debug)]
pub struct Heading<'a> {
    /// Name of the survey.
    pub survey: &'a str,
    /// Name of the site.
    pub site: &'a str,
}

/// A report in all its faces.
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Rendered {
    /// Lines of at most 100 columns.
    pub text: String,
    /// A whole page.
    pub html: String,
    /// One object.
    pub json: String,
}

/// All faces of a report.
pub fn render(report: &NightReport, heading: &Heading<'_>) -> Rendered {
    Rendered {
        text: text(report, heading),
        html: html::page(report, heading),
        json: format!("{:#}\n", json::object(report, heading)),
    }
}

/// The face for a terminal or a mail, in lines of at most 100 columns.
pub fn text(report: &NightReport, heading: &Heading<'_>) -> String {
    text::lines(report, heading)
}
