//! A night: sun, twilights, moon, and each target's windows.

use comfy_table::Table;
use rayon::prelude::*;
use serde_json::{Value, json};

use super::super::{Exit, Trouble, load, output};
use super::{quality_word, rounded};
use crate::catalogue::{Target, Telescope};
use crate::ephemeris::{
    EphemerisError, HorizonState, MoonEvents, NightSky, Observer, Passages, SkyInstant, StarMotion,
    SunEvents, altitude_of_airmass,
};
use crate::settings::Settings;
use crate::time::{Night, Span, SpanSet, Utc};
use crate::units::Angle;

/// A target's night.
struct TargetNight<'a> {
    id: &'a str,
    transit: Option<Utc>,
    up: SpanSet,
    best: Option<Best>,
}

/// A target at its highest while up.
struct Best {
    airmass: f64,
    moon_separation_deg: f64,
}

struct Told<'a> {
    night: Night,
    sun: SunEvents,
    moon: MoonEvents,
    darkness: Option<Span>,
    darkness_altitude: Angle,
    targets: Vec<TargetNight<'a>>,
    earth_rotation: &'static str,
}

/// Prints the night.
pub fn print(
    settings: &Settings,
    observer: &Observer,
    targets: &[&Target],
    night: Night,
    json: bool,
) -> Result<(), Trouble> {
    let misuse = |error: EphemerisError| Trouble::from_error(Exit::Misuse, &error);
    let sky = NightSky::of(observer, night).map_err(misuse)?;
    load::mention_rotation(sky.rotation_quality());
    let darkness_altitude = settings.survey.planning.darkness_sun_altitude;
    let darkness = sky.darkness(darkness_altitude);
    let scene = Scene {
        sky: &sky,
        observer,
        telescope: &settings.survey.telescope,
        darkness,
    };
    let told = Told {
        night,
        sun: sky.sun(),
        moon: sky.moon(),
        darkness,
        darkness_altitude,
        targets: targets
            .par_iter()
            .map(|target| scene.target(target))
            .collect::<Result<_, _>>()
            .map_err(misuse)?,
        earth_rotation: quality_word(sky.rotation_quality()),
    };
    if json {
        output::print_json(&as_json(&told))
    } else {
        output::print(&as_text(&told))
    }
}

struct Scene<'a> {
    sky: &'a NightSky,
    observer: &'a Observer,
    telescope: &'a Telescope,
    darkness: Option<Span>,
}

impl Scene<'_> {
    fn target<'t>(&self, target: &'t Target) -> Result<TargetNight<'t>, EphemerisError> {
        let star = StarMotion::of(&target.star);
        let limit = self.lowest(target);
        let clear = self
            .sky
            .star_clear(&star, limit, &self.observer.site.horizon);
        let up = match self.darkness {
            Some(darkness) => clear.intersect(&darkness.into()),
            None => SpanSet::default(),
        };
        let highest = up
            .spans()
            .iter()
            .filter_map(|span| self.sky.highest(&star, *span))
            .max_by(|a, b| a.1.rad().total_cmp(&b.1.rad()));
        let best = match highest {
            None => None,
            Some((at, _)) => {
                let place = SkyInstant::at(self.observer, at)?.star(&star);
                Some(Best {
                    airmass: place.airmass,
                    moon_separation_deg: place.moon_separation.deg(),
                })
            }
        };
        Ok(TargetNight {
            id: target.id.as_str(),
            transit: self.sky.star(&star, limit).transit.map(|t| t.at),
            up,
            best,
        })
    }

    /// Lowest altitude at which a target may be observed.
    fn lowest(&self, target: &Target) -> Angle {
        let own = target.limits.min_altitude.unwrap_or(Angle::ZERO);
        let by_airmass = target.limits.max_airmass.map_or(Angle::ZERO, |limit| {
            altitude_of_airmass(self.observer.airmass_model, limit)
        });
        [own, by_airmass]
            .into_iter()
            .fold(self.telescope.min_altitude, |highest, angle| {
                if angle > highest { angle } else { highest }
            })
    }
}

fn event(at: Option<Utc>) -> Value {
    at.map_or(Value::Null, |at| json!(at.to_string()))
}

fn span(span: &Span) -> Value {
    json!({"start": span.start.to_string(), "end": span.end.to_string()})
}

fn as_json(told: &Told<'_>) -> Value {
    let (sun, moon) = (&told.sun, &told.moon);
    let targets: Vec<Value> = told
        .targets
        .iter()
        .map(|target| {
            let best = target.best.as_ref();
            json!({
                "id": target.id,
                "transit": event(target.transit),
                "up": target.up.spans().iter().map(span).collect::<Vec<Value>>(),
                "best_airmass": best.map(|b| rounded(b.airmass, 6)),
                "moon_separation_deg": best.map(|b| rounded(b.moon_separation_deg, 6)),
            })
        })
        .collect();
    json!({
        "night": told.night.date.to_string(),
        "sun": {
            "set": event(sun.horizon.down),
            "rise": event(sun.horizon.up),
            "civil_dusk": event(sun.civil.down),
            "nautical_dusk": event(sun.nautical.down),
            "astronomical_dusk": event(sun.astronomical.down),
            "civil_dawn": event(sun.civil.up),
            "nautical_dawn": event(sun.nautical.up),
            "astronomical_dawn": event(sun.astronomical.up),
        },
        "darkness": told.darkness.as_ref().map_or(Value::Null, span),
        "moon": {
            "rise": event(moon.horizon.up),
            "set": event(moon.horizon.down),
            "transit": event(moon.transit.map(|t| t.at)),
            "illuminated_fraction": rounded(moon.illuminated_fraction, 6),
        },
        "earth_rotation": told.earth_rotation,
        "targets": targets,
    })
}

fn as_text(told: &Told<'_>) -> String {
    let mut lines = vec![format!(
        "Night {} (UTC; Earth rotation {})",
        told.night.date, told.earth_rotation
    )];
    let sun = &told.sun;
    lines.push(passages("sun", &sun.horizon, ("sets", "rises")));
    lines.push(passages("civil", &sun.civil, ("dusk", "dawn")));
    lines.push(passages("nautical", &sun.nautical, ("dusk", "dawn")));
    lines.push(passages(
        "astronomical",
        &sun.astronomical,
        ("dusk", "dawn"),
    ));
    lines.push(match &told.darkness {
        Some(dark) => format!(
            "darkness      {} to {}, {:.2} h below {}°",
            clock(dark.start),
            clock(dark.end),
            dark.length_ms() as f64 / 3_600_000.0,
            rounded(told.darkness_altitude.deg(), 3)
        ),
        None => format!(
            "darkness      none: the sun does not go below {}°",
            rounded(told.darkness_altitude.deg(), 3)
        ),
    });
    let transit = match told.moon.transit {
        Some(t) => format!("transit {} at {:.1}°", clock(t.at), t.altitude.deg()),
        None => "no transit".to_owned(),
    };
    lines.push(format!(
        "{}, {transit}, lit {:.3}",
        passages("moon", &told.moon.horizon, ("sets", "rises")),
        told.moon.illuminated_fraction
    ));
    lines.push(String::new());
    let mut table = Table::new();
    table.load_style(comfy_table::presets::NOTHING);
    table.set_header([
        "target",
        "transit",
        "up in the dark",
        "best airmass",
        "moon°",
    ]);
    for target in &told.targets {
        table.add_row(cells(target));
    }
    lines.push(table.to_string());
    lines.join("\n")
}

fn passages(name: &str, passages: &Passages, (down, up): (&str, &str)) -> String {
    let text = match passages.state {
        HorizonState::Above => "above all night".to_owned(),
        HorizonState::Below => "below all night".to_owned(),
        HorizonState::Crosses => [(passages.down, down), (passages.up, up)]
            .into_iter()
            .filter_map(|(at, word)| at.map(|at| format!("{word} {}", clock(at))))
            .collect::<Vec<String>>()
            .join(", "),
    };
    format!("{name:<13} {text}")
}

/// Hours, minutes and seconds of an instant, to the second below.
fn clock(at: Utc) -> String {
    let text = at.to_string();
    text.get(11..19).unwrap_or(&text).to_owned()
}

fn cells(target: &TargetNight<'_>) -> Vec<String> {
    let up: Vec<String> = target
        .up
        .spans()
        .iter()
        .map(|span| format!("{}-{}", clock(span.start), clock(span.end)))
        .collect();
    let best = target.best.as_ref();
    vec![
        target.id.to_owned(),
        target.transit.map_or("-".to_owned(), clock),
        if up.is_empty() {
            "not up".to_owned()
        } else {
            up.join(" ")
        },
        best.map_or("-".to_owned(), |b| format!("{:.3}", b.airmass)),
        best.map_or("-".to_owned(), |b| format!("{:.1}", b.moon_separation_deg)),
    ]
}
