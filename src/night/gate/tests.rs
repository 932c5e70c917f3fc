use std::collections::BTreeMap;

use super::*;
use crate::weather::WeatherRules;

const STALE_S: f64 = 180.0;
const DWELL_S: f64 = 300.0;
const OPENING_S: f64 = 600.0;

fn rules() -> NightRules {
    NightRules::new(WeatherRules {
        rules: vec![WeatherRule {
            quantity: Quantity::WindMS,
            hold_at: 15.0,
            release_at: 12.0,
            dwell_s: DWELL_S,
            high_is_bad: true,
        }],
        stale_after_s: STALE_S,
        opening_dwell_s: OPENING_S,
        require_safe_flag: false,
    })
}

fn stamp(second: i64) -> Stamp {
    Stamp {
        utc: Utc::from_unix_ms(1_800_000_000_000 + second * 1000),
        mono: MonotonicMs(second * 1000),
    }
}

fn sample(second: i64, wind: f64) -> WeatherSample {
    WeatherSample {
        at: stamp(second).utc,
        values: BTreeMap::from([(Quantity::WindMS, wind)]),
        wind_from: None,
        safe: None,
    }
}

/// A gate that has seen good weather each minute from second 0 to `until`.
fn opened(until: i64) -> (Gate, NightRules) {
    let rules = rules();
    let mut gate = Gate::closed(&rules);
    for second in (0..=until).step_by(60) {
        gate.take(sample(second, 5.0), stamp(second), &rules);
    }
    (gate, rules)
}

fn is_bad(gate: &Gate, rules: &NightRules) -> bool {
    matches!(gate.verdict(rules), Verdict::Bad(_))
}

fn is_lost(gate: &Gate, rules: &NightRules) -> bool {
    matches!(gate.verdict(rules), Verdict::Lost(_))
}

#[test]
fn opens_after_the_opening_dwell_and_not_before() {
    let rules = rules();
    assert_eq!(
        Gate::closed(&rules).verdict(&rules),
        Verdict::Lost(FeedFault::NoneYet)
    );
    assert!(is_bad(&opened(540).0, &rules));
    assert_eq!(opened(600).0.verdict(&rules), Verdict::Open);
}

#[test]
fn holds_at_one_limit_and_releases_at_the_other_after_the_dwell() {
    let (mut gate, rules) = opened(600);
    let mut at = 600;
    let mut see = |gate: &mut Gate, wind| {
        at += 60;
        gate.take(sample(at, wind), stamp(at), &rules);
        gate.verdict(&rules) == Verdict::Open
    };
    assert!(see(&mut gate, 14.9), "between the limits what was, stays");
    assert!(!see(&mut gate, 15.0), "bad from the limit on");
    for _ in 0..30 {
        assert!(!see(&mut gate, 13.0), "between the limits what was, stays");
    }
    for _ in 0..4 {
        assert!(!see(&mut gate, 12.0), "good, but not long enough");
    }
    assert!(!see(&mut gate, 13.0), "the dwell starts over");
    for _ in 0..5 {
        assert!(!see(&mut gate, 12.0), "good, but not long enough");
    }
    assert!(see(&mut gate, 12.0), "300 s of good samples");
}

#[test]
fn small_may_be_the_bad_side() {
    let rule = WeatherRule {
        quantity: Quantity::DewPointSpreadK,
        hold_at: 2.0,
        release_at: 3.0,
        dwell_s: 0.0,
        high_is_bad: false,
    };
    let check = |value: Option<&f64>, expected: Reading| assert!(read(&rule, value) == expected);
    check(Some(&2.0), Reading::Bad);
    check(Some(&2.5), Reading::Between);
    check(Some(&3.0), Reading::Good);
    check(None, Reading::Bad);
}

#[test]
fn nonsense_loses_the_feed_at_once() {
    let at = 660;
    for value in [f64::NAN, f64::INFINITY, -9999.0, -0.1] {
        let (mut gate, rules) = opened(600);
        gate.take(sample(at, value), stamp(at), &rules);
        assert!(is_lost(&gate, &rules), "{value}");
    }
    let (mut gate, rules) = opened(600);
    gate.take(sample(at + 61, 5.0), stamp(at), &rules);
    assert!(is_lost(&gate, &rules), "time stamp ahead");
    let (mut gate, rules) = opened(600);
    gate.fail(FeedFault::Malformed("a web page".to_owned()));
    assert!(is_lost(&gate, &rules));
}

#[test]
fn silence_and_a_stuck_time_stamp_are_borne_until_stale() {
    let (mut gate, rules) = opened(600);
    gate.fail(FeedFault::Unreachable("refused".to_owned()));
    gate.take(sample(600, 5.0), stamp(779), &rules);
    gate.expire(stamp(779).mono, &rules);
    assert_eq!(gate.verdict(&rules), Verdict::Open);
    assert_eq!(gate.stale_at(), Some(stamp(780).mono));
    gate.take(sample(600, 5.0), stamp(780), &rules);
    gate.expire(stamp(780).mono, &rules);
    assert!(is_lost(&gate, &rules));
    gate.take(sample(600, 5.0), stamp(800), &rules);
    assert!(is_lost(&gate, &rules), "the same stamp brings nothing back");
}

#[test]
fn a_sample_that_comes_in_old_is_stale_and_shortens_what_is_left() {
    let (mut gate, rules) = opened(600);
    gate.take(sample(610, 5.0), stamp(700), &rules);
    assert_eq!(gate.stale_at(), Some(stamp(790).mono));
    gate.take(sample(620, 5.0), stamp(800), &rules);
    assert!(is_lost(&gate, &rules));
}

#[test]
fn a_feed_that_comes_back_earns_each_dwell_again_but_not_the_opening() {
    let (mut gate, rules) = opened(600);
    gate.fail(FeedFault::Malformed("rubbish".to_owned()));
    for second in (660..960).step_by(60) {
        gate.take(sample(second, 5.0), stamp(second), &rules);
        assert!(is_bad(&gate, &rules));
    }
    gate.take(sample(960, 5.0), stamp(960), &rules);
    assert_eq!(gate.verdict(&rules), Verdict::Open);
}

#[test]
fn a_missing_quantity_and_a_missing_verdict_are_bad() {
    let (mut gate, mut rules) = opened(600);
    let mut bare = sample(660, 5.0);
    bare.values.clear();
    gate.take(bare, stamp(660), &rules);
    assert!(is_bad(&gate, &rules));

    let (mut gate, _) = opened(600);
    rules.weather.require_safe_flag = true;
    gate.take(sample(660, 5.0), stamp(660), &rules);
    assert!(is_bad(&gate, &rules));

    let (mut gate, rules) = opened(600);
    let unsafe_word = WeatherSample {
        safe: Some(false),
        ..sample(660, 5.0)
    };
    gate.take(unsafe_word, stamp(660), &rules);
    assert!(is_bad(&gate, &rules), "an unasked 'unsafe' is heeded too");
}

#[test]
fn after_a_restart_what_was_open_waits_for_a_word_as_long_as_one_stays_fresh() {
    let rules = rules();
    let mut gate = Gate::resumed(&rules, true, stamp(0).mono);
    assert_eq!(gate.verdict(&rules), Verdict::Unheard);
    gate.take(sample(10, 5.0), stamp(10), &rules);
    assert_eq!(gate.verdict(&rules), Verdict::Open);

    let mut gate = Gate::resumed(&rules, true, stamp(0).mono);
    gate.expire(stamp(180).mono, &rules);
    assert!(is_lost(&gate, &rules));
    let gate = Gate::resumed(&rules, false, stamp(0).mono);
    assert!(is_lost(&gate, &rules));
}

#[test]
fn a_step_of_the_wall_clock_does_not_make_new_samples_old_news() {
    let (mut gate, rules) = opened(600);
    gate.clock_stepped();
    let back = Stamp {
        utc: stamp(600).utc.plus_ms(-3_600_000),
        mono: MonotonicMs(660_000),
    };
    let fresh = WeatherSample {
        at: back.utc,
        ..sample(0, 5.0)
    };
    gate.take(fresh, back, &rules);
    assert_eq!(gate.verdict(&rules), Verdict::Open);
    assert_eq!(gate.stale_at(), Some(MonotonicMs(840_000)));
}
