//! The reports of nights, as they were written.

use rusqlite::{OptionalExtension, params};

use super::SqliteLedger;
use crate::ports::LedgerFault;
use crate::report::Rendered;
use crate::time::{NightDate, Utc};

impl SqliteLedger {
    /// Keeps a night's report in all its faces. One that says what the last one of the night said
    /// is not kept again.
    ///
    /// # Errors
    /// [`LedgerFault::Unwritable`]; nothing was kept.
    pub fn keep_report(
        &mut self,
        night: NightDate,
        written: Utc,
        report: &Rendered,
    ) -> Result<(), LedgerFault> {
        let last = self.report(night)?;
        if last.is_some_and(|last| last == *report) {
            return Ok(());
        }
        self.in_transaction(|connection| {
            connection.execute(
                "INSERT INTO night_reports (night, written_unix_ms, text, html, json)
                 VALUES (?, ?, ?, ?, ?)",
                params![
                    night.to_string(),
                    written.unix_ms(),
                    report.text,
                    report.html,
                    report.json
                ],
            )?;
            Ok(())
        })
    }

    /// The report that stands for a night, if one was written.
    ///
    /// # Errors
    /// [`LedgerFault::Unreadable`].
    pub fn report(&self, night: NightDate) -> Result<Option<Rendered>, LedgerFault> {
        let mut last = self
            .connection
            .prepare_cached(
                "SELECT text, html, json FROM night_reports WHERE night = ?
                 ORDER BY id DESC LIMIT 1",
            )
            .map_err(|error| self.reading(error))?;
        last.query_row([night.to_string()], |row| {
            Ok(Rendered {
                text: row.get(0)?,
                html: row.get(1)?,
                json: row.get(2)?,
            })
        })
        .optional()
        .map_err(|error| self.reading(error))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_last_report_stands_and_none_is_changed() {
        let mut ledger = SqliteLedger::in_memory().unwrap();
        let night = NightDate::parse("2026-12-01").unwrap();
        let report = |text: &str| Rendered {
            text: text.to_owned(),
            html: format!("<p>{text}"),
            json: "{}".to_owned(),
        };
        assert_eq!(ledger.report(night).unwrap(), None);
        let at = Utc::from_unix_ms;
        for (ms, text) in [(1, "first"), (2, "first"), (3, "with a late report")] {
            ledger.keep_report(night, at(ms), &report(text)).unwrap();
        }
        assert_eq!(
            ledger.report(night).unwrap(),
            Some(report("with a late report"))
        );
        assert_eq!(ledger.report(night.plus_nights(1)).unwrap(), None);
        let count = "SELECT count(*) FROM night_reports";
        let kept: i64 = ledger
            .connection
            .query_row(count, [], |row| row.get(0))
            .unwrap();
        assert_eq!(kept, 2);
        for change in [
            "DELETE FROM night_reports",
            "UPDATE night_reports SET text = ''",
        ] {
            assert!(ledger.connection.execute_batch(change).is_err(), "{change}");
        }
    }
}
