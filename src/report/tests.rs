//! Every face of a night in which much happened.

use super::*;
use crate::catalogue::TargetId;
use crate::night::{Fact, RunMode};
use crate::record::{
    EntryKind, Exposures, HoldCause, LossCause, Outcome, PlanCause, PlanRevision, QueueEntry,
    ValueParts, Visit, VisitId,
};
use crate::time::{NightDate, Span, SpanSet, Utc};
use crate::weather::{Quantity, WeatherSample};

fn at(minute: i64) -> Utc {
    Utc::parse("2026-12-02T00:00:00Z")
        .unwrap()
        .plus_ms(60_000 * minute)
}

fn night() -> NightDate {
    NightDate::parse("2026-12-01").unwrap()
}

const HEADING: Heading<'_> = Heading {
    survey: "Nearby <stars> & planets",
    site: "a hill",
};

fn entry(subject: &str, from: i64) -> QueueEntry {
    QueueEntry {
        kind: EntryKind::Science,
        subject: TargetId::new(subject),
        start: at(from),
        end: at(from + 20),
        setup_s: 60.0,
        exposures: Exposures {
            count: 2,
            seconds: 580.0,
        },
        predicted_rv_error_m_s: Some(1.2),
        airmass: Some(1.25),
        altitude_deg: Some(53.0),
        azimuth_deg: Some(10.0),
        moon_separation_deg: None,
        value: ValueParts::default(),
        because: "due".to_owned(),
    }
}

fn granted(number: u32, subject: &str, from: i64) -> Fact {
    Fact::LeaseGranted(crate::night::Lease {
        visit: VisitId::of(night(), number),
        entry: entry(subject, from),
        revision: 1,
        claim_key: format!("c{number}"),
        holder: "dome".to_owned(),
        granted: at(from - 1),
        expires: at(from + 30),
    })
}

fn ended(number: u32, subject: &str, from: i64, outcome: Outcome, note: &str) -> Fact {
    let gathered = outcome == Outcome::Done;
    Fact::VisitEnded {
        at: at(from + 20),
        report_key: format!("r{number}"),
        visit: Visit {
            id: VisitId::of(night(), number),
            night: night(),
            kind: EntryKind::Science,
            subject: TargetId::new(subject),
            began: at(from - 1),
            exposing: Span::new(at(from), at(from + if gathered { 20 } else { 0 })),
            exposed_s: if gathered { 1160.0 } else { 0.0 },
            planned: entry(subject, from).exposures,
            outcome,
            credit: if gathered { 1.0 } else { 0.0 },
            airmass: Some(1.25),
            snr: Some(80.0),
            rv_error_m_s: None,
            predicted_rv_error_m_s: Some(1.2),
            mid_bjd_tdb: None,
            note: note.to_owned(),
        },
    }
}

fn weather(minute: i64, wind: f64) -> Fact {
    Fact::WeatherNoted(WeatherSample {
        at: at(minute),
        values: [(Quantity::WindMS, wind), (Quantity::CloudPercent, 5.0)].into(),
        wind_from: None,
        safe: Some(true),
    })
}

fn facts() -> Vec<Fact> {
    let revision = PlanRevision {
        night: night(),
        number: 1,
        made_at: at(-60),
        from: at(0),
        cause: PlanCause::Evening,
        entries: vec![entry("NEAR-1", 2), entry("NEAR-2", 30)],
        left_out: Vec::new(),
        value: 1.5,
        bound: Some(1.6),
    };
    let long = "GustMS = 21.0, hold at 19, release at 15; HumidityPercent = 91.0, hold at 88, \
                release at 82; CloudPercent = 80.0, hold at 70, release at 50";
    vec![
        Fact::NightOpened {
            night: night(),
            span: Span::new(at(-420), at(1020)),
            darkness: Some(Span::new(at(0), at(120))),
            ours: true,
            mode: RunMode::Rehearsal,
        },
        Fact::PlanPublished(revision),
        weather(0, 4.0),
        granted(1, "NEAR-1", 2),
        ended(1, "NEAR-1", 2, Outcome::Done, ""),
        granted(2, "a-target-with-an-endless-name-indeed", 30),
        ended(
            2,
            "a-target-with-an-endless-name-indeed",
            30,
            Outcome::Lost(LossCause::Weather),
            &format!("cloud <b>came</b>; {}", "and more of it ".repeat(20)),
        ),
        Fact::HoldBegan {
            at: at(40),
            cause: HoldCause::Weather,
            detail: long.to_owned(),
        },
        weather(40, 21.0),
        Fact::HoldEnded {
            at: at(100),
            cause: HoldCause::Weather,
        },
        Fact::Note {
            at: at(105),
            by: "ann".to_owned(),
            text: format!("an even longer word: {} y", "x".repeat(75)),
        },
        granted(3, "NEAR-3", 110),
    ]
}

fn report() -> NightReport {
    NightReport::from_facts(&facts(), &SpanSet::default()).unwrap()
}

#[test]
fn the_text_tells_everything_within_a_hundred_columns() {
    let text = render(&report(), &HEADING).text;
    for line in text.lines() {
        assert!(line.chars().count() <= 100, "{line}");
        assert_eq!(line, line.trim_end());
    }
    for told in [
        "Night 2026-12-01: Nearby <stars> & planets, a hill",
        "A rehearsal",
        "The night is still open",
        "Darkness 2026-12-02 00:00 to 2026-12-02 02:00 UTC, 2.00 h",
        "held_weather                 60.0 min  50.0 %",
        "1 done, 0 short, 1 lost",
        "lost (weather)",
        "00:40–01:40 weather      60.0 min  GustMS = 21.0",
        "1 23:00 first queue of the night: 2 entries worth 1.50, 93.8 % of the bound",
        "01:45 ann: an even longer word:",
        "2026-12-01-0003 NEAR-3: has not ended",
        "wind, m/s                   4.0     21.0     21.0",
    ] {
        assert!(text.contains(told), "{told}\n{text}");
    }
}

#[test]
fn the_page_is_whole_escaped_and_needs_nothing_else() {
    let html = render(&report(), &HEADING).html;
    assert!(html.starts_with("<!DOCTYPE html>"));
    assert!(html.contains("Nearby &lt;stars&gt; &amp; planets"));
    assert!(html.contains("cloud &lt;b&gt;came"));
    for outside in [
        "http://", "https://", "<script", "style=\"", "NaN", "<b>came",
    ] {
        assert!(!html.contains(outside), "{outside}");
    }
    for told in [
        "A rehearsal",
        "Holds",
        "lost (weather)",
        "93.8 %",
        "It does not protect people",
    ] {
        assert!(html.contains(told), "{told}");
    }
}

#[test]
fn the_json_adds_up_and_names_what_happened() {
    let rendered = render(&report(), &HEADING);
    let json: serde_json::Value = serde_json::from_str(&rendered.json).unwrap();
    let split = json["split_ms"].as_object().unwrap();
    let sum: i64 = split.values().filter_map(serde_json::Value::as_i64).sum();
    assert_eq!(Some(sum), json["darkness_ms"].as_i64());
    assert_eq!(json["mode"], "rehearsal");
    assert_eq!(json["visits"][1]["cause"], "weather");
    assert_eq!(json["holds"][0]["cause"], "weather");
    assert_eq!(json["under_way"]["subject"], "NEAR-3");
    assert_eq!(json["weather"][1]["values"]["wind_m_s"], 21.0);
    assert_eq!(rendered, render(&report(), &HEADING));
}

#[test]
fn a_night_without_darkness_or_visits_has_every_face_too() {
    let opened = Fact::NightOpened {
        night: night(),
        span: Span::new(at(-420), at(1020)),
        darkness: None,
        ours: true,
        mode: RunMode::Real,
    };
    let report = NightReport::from_facts(&[opened], &SpanSet::default()).unwrap();
    let rendered = render(&report, &HEADING);
    assert!(rendered.text.contains("There was no darkness."));
    assert!(rendered.html.contains("There was no darkness."));
    assert!(!rendered.text.contains("rehearsal"));
}
