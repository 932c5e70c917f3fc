//! The feeds against a server on loopback that does what bad servers do, and through the gate.

use std::sync::Arc;
use std::sync::atomic::{AtomicUsize, Ordering};
use std::time::Instant;

use rand::SeedableRng;
use tokio::io::{AsyncReadExt, AsyncWriteExt};
use tokio::net::{TcpListener, TcpStream};

use super::*;
use crate::night::{Gate, NightRules, Stamp, Verdict};
use crate::settings::{AlpacaFeed, FeedSource, JsonFeed, MappedKind, MappedValue, TimeFormat};
use crate::sim::SimClock;
use crate::time::{MonotonicMs, Utc};
use crate::weather::{Quantity, WeatherRule, WeatherRules};

/// What the server does with a request.
#[derive(Clone)]
enum Deed {
    /// Sends these bytes and closes.
    Send(Vec<u8>),
    /// Sends the head of an answer, then a byte now and then.
    Drip,
    /// Takes the request and says nothing.
    Silence,
    /// Closes at once.
    Hang,
    /// Sends a body without end.
    Flood,
}

struct Server {
    address: String,
    asked: Arc<AtomicUsize>,
}

/// Answers each request by what `deed` makes of its first line.
async fn serve(deed: impl Fn(&str) -> Deed + Send + Sync + 'static) -> Server {
    let listener = TcpListener::bind("127.0.0.1:0").await.unwrap();
    let address = format!("http://{}", listener.local_addr().unwrap());
    let asked = Arc::new(AtomicUsize::new(0));
    let (deed, count) = (Arc::new(deed), Arc::clone(&asked));
    tokio::spawn(async move {
        while let Ok((stream, _)) = listener.accept().await {
            count.fetch_add(1, Ordering::SeqCst);
            let deed = Arc::clone(&deed);
            tokio::spawn(async move { one(stream, deed.as_ref()).await });
        }
    });
    Server { address, asked }
}

async fn one(mut stream: TcpStream, deed: &(dyn Fn(&str) -> Deed + Send + Sync)) {
    let mut request = vec![0; 4096];
    let read = stream.read(&mut request).await.unwrap_or(0);
    let request = String::from_utf8_lossy(&request[..read]).into_owned();
    let head = b"HTTP/1.1 200 OK\r\nconnection: close\r\n\r\n";
    match deed(request.lines().next().unwrap_or("")) {
        Deed::Send(bytes) => {
            let _ = stream.write_all(&bytes).await;
        }
        Deed::Drip => {
            let _ = stream.write_all(head).await;
            while stream.write_all(b" ").await.is_ok() {
                tokio::time::sleep(Duration::from_millis(20)).await;
            }
        }
        Deed::Silence => tokio::time::sleep(Duration::from_secs(60)).await,
        Deed::Hang => {}
        Deed::Flood => {
            let _ = stream.write_all(head).await;
            while stream.write_all(&[b' '; 65536]).await.is_ok() {}
        }
    }
}

fn answer(status: &str, body: &str) -> Deed {
    let length = body.len();
    Deed::Send(
        format!("HTTP/1.1 {status}\r\ncontent-length: {length}\r\nconnection: close\r\n\r\n{body}")
            .into_bytes(),
    )
}

fn fine(body: &str) -> Deed {
    answer("200 OK", body)
}

fn live(source: FeedSource) -> LiveFeed {
    let feed = Feed {
        poll_s: 30.0,
        timeout_s: 0.4,
        source,
    };
    LiveFeed::new(&feed, ChaCha8Rng::seed_from_u64(7)).unwrap()
}

fn json_feed(url: &str) -> LiveFeed {
    let value = |quantity, from: &str, factor| MappedValue {
        kind: MappedKind::Quantity(quantity),
        from: from.to_owned(),
        factor,
        offset: 0.0,
    };
    live(FeedSource::Json(JsonFeed {
        url: url.to_owned(),
        time: "/time".to_owned(),
        time_format: TimeFormat::Rfc3339,
        safe: Some("/safe".to_owned()),
        values: vec![
            value(Quantity::WindMS, "/wind/mean", 0.5),
            value(Quantity::SeeingArcsec, "/seeing", 1.0),
        ],
    }))
}

const START: &str = "2026-12-01T23:00:00Z";

fn clock() -> SimClock {
    SimClock::at(Utc::parse(START).unwrap())
}

fn document(time: &str, wind: &str) -> String {
    format!("{{\"time\":\"{time}\",\"safe\":true,\"wind\":{{\"mean\":{wind}}},\"seeing\":null}}")
}

async fn polled(deed: Deed) -> Result<WeatherSample, FeedFault> {
    let server = serve(move |_| deed.clone()).await;
    json_feed(&server.address).poll(&clock()).await
}

#[tokio::test]
async fn a_sound_document_becomes_a_sample_in_the_units_of_the_rules() {
    let sample = polled(fine(&document(START, "9"))).await.unwrap();
    assert_eq!(sample.at, Utc::parse(START).unwrap());
    assert_eq!(sample.values[&Quantity::WindMS], 4.5);
    assert_eq!(sample.safe, Some(true));
    // Not measured: left out, for the rules to judge.
    assert!(!sample.values.contains_key(&Quantity::SeeingArcsec));
}

#[tokio::test]
async fn what_is_no_sample_is_malformed() {
    let sound = document(START, "9");
    let cases = [
        fine("<!doctype html><html><body>Welcome</body></html>"),
        fine(""),
        fine("[]"),
        fine(&document(START, "NaN")),
        fine(&document(START, "1e999")),
        fine(&document(START, "\"9\"")),
        fine(&document(START, "true")),
        fine(&document("yesterday", "9")),
        fine(&document("2026-12-01T23:00:00", "9")),
        fine(&sound.replace("\"time\"", "\"when\"")),
        fine(&sound.replace("\"mean\"", "\"gust\"")),
        fine(&sound.replace("true", "\"yes\"")),
        fine(&"[".repeat(100_000)),
        answer("500 Internal Server Error", &sound),
        answer("204 No Content", ""),
        answer("301 Moved Permanently\r\nlocation: /", &sound),
        Deed::Flood,
    ];
    for (case, deed) in cases.into_iter().enumerate() {
        let fault = polled(deed).await.unwrap_err();
        assert!(
            matches!(fault, FeedFault::Malformed(_)),
            "{case}: {fault:?}"
        );
        assert!(fault.to_string().len() < 300, "{case}: {fault}");
    }
}

#[tokio::test]
async fn a_redirect_that_leads_back_is_asked_once() {
    let server = serve(|_| answer("302 Found\r\nlocation: /again", "")).await;
    let fault = json_feed(&server.address).poll(&clock()).await.unwrap_err();
    assert!(fault.to_string().contains("sends elsewhere"), "{fault}");
    assert_eq!(server.asked.load(Ordering::SeqCst), 1);
}

#[tokio::test]
async fn silence_drip_and_closed_doors_end_in_time() {
    let cut = b"HTTP/1.1 200 OK\r\ncontent-length: 500\r\n\r\n{\"time\":".to_vec();
    for deed in [Deed::Silence, Deed::Drip, Deed::Hang, Deed::Send(cut)] {
        let began = Instant::now();
        let fault = polled(deed).await.unwrap_err();
        assert!(matches!(fault, FeedFault::Unreachable(_)), "{fault:?}");
        assert!(began.elapsed() < Duration::from_secs(5));
    }
    // Nobody listens there any more.
    let address = serve(|_| Deed::Hang).await.address;
    let closed = TcpListener::bind("127.0.0.1:0").await.unwrap();
    let refused = format!("http://{}", closed.local_addr().unwrap());
    drop(closed);
    assert_ne!(address, refused);
    let fault = json_feed(&refused).poll(&clock()).await.unwrap_err();
    assert!(matches!(fault, FeedFault::Unreachable(_)), "{fault:?}");
}

/// One rule on the wind, and no waiting but its dwell.
fn rules() -> NightRules {
    NightRules::new(WeatherRules {
        rules: vec![WeatherRule {
            quantity: Quantity::WindMS,
            hold_at: 14.0,
            release_at: 11.0,
            dwell_s: 120.0,
            high_is_bad: true,
        }],
        stale_after_s: 120.0,
        opening_dwell_s: 60.0,
        require_safe_flag: false,
    })
}

fn stamp(second: i64) -> Stamp {
    Stamp {
        utc: Utc::parse(START).unwrap().plus_ms(1000 * second),
        mono: MonotonicMs(1000 * second),
    }
}

/// Polls each of the documents half a minute after the other, and gives the gate's word after each.
async fn through_the_gate(documents: Vec<String>) -> Vec<Verdict> {
    let next = AtomicUsize::new(0);
    let count = documents.len();
    let server = serve(move |_| fine(&documents[next.fetch_add(1, Ordering::SeqCst)])).await;
    let feed = json_feed(&server.address);
    let rules = rules();
    let mut gate = Gate::closed(&rules);
    let mut verdicts = Vec::new();
    for index in 0..count {
        let now = stamp(30 * index as i64);
        match feed.poll(&clock()).await {
            Ok(sample) => gate.take(sample, now, &rules),
            Err(fault) => gate.fail(fault),
        }
        gate.expire(now.mono, &rules);
        verdicts.push(gate.verdict(&rules));
    }
    verdicts
}

/// A document of that half-minute.
fn at(half_minute: i64, wind: &str) -> String {
    document(&stamp(30 * half_minute).utc.to_string(), wind)
}

#[tokio::test]
async fn flapping_around_the_threshold_is_one_hold() {
    // The feed gives half metres a second: 29 is above 14 m/s, 27 below, 20 below the release.
    let winds = ["20"; 6]
        .into_iter()
        .chain(["29", "27"].into_iter().cycle().take(20));
    let winds = winds.chain(["20"; 6]);
    let documents = winds
        .enumerate()
        .map(|(i, wind)| at(i as i64, wind))
        .collect();
    let verdicts = through_the_gate(documents).await;
    let open: Vec<bool> = verdicts.iter().map(|v| *v == Verdict::Open).collect();
    let holds = open.windows(2).filter(|pair| pair[0] && !pair[1]).count();
    assert!(open[5], "{:?}", verdicts[5]);
    assert_eq!(holds, 1, "{verdicts:?}");
    assert_eq!(open.last(), Some(&true), "{verdicts:?}");
}

#[tokio::test]
async fn a_time_stamp_that_stands_still_or_runs_ahead_closes_the_gate() {
    let mut documents: Vec<String> = (0..6).map(|i| at(i, "10")).collect();
    documents.extend((6..12).map(|_| at(5, "10")));
    let verdicts = through_the_gate(documents).await;
    assert_eq!(verdicts[5], Verdict::Open);
    assert_eq!(verdicts[8], Verdict::Open, "not stale yet");
    let stuck = verdicts.last().unwrap();
    assert!(
        matches!(stuck, Verdict::Lost(FeedFault::Stale { .. })),
        "{stuck:?}"
    );

    let mut documents: Vec<String> = (0..6).map(|i| at(i, "10")).collect();
    documents.push(at(600, "10"));
    let verdicts = through_the_gate(documents).await;
    let ahead = verdicts.last().unwrap();
    assert!(
        matches!(ahead, Verdict::Lost(FeedFault::FutureStamp { .. })),
        "{ahead:?}"
    );
}

#[tokio::test]
async fn nonsense_and_no_document_close_an_open_gate_at_once() {
    for last in [at(6, "-9999"), "<html>".to_owned(), at(6, "null")] {
        let mut documents: Vec<String> = (0..6).map(|i| at(i, "10")).collect();
        documents.push(last);
        let verdicts = through_the_gate(documents).await;
        assert_eq!(verdicts[5], Verdict::Open);
        assert_ne!(verdicts[6], Verdict::Open);
    }
}

#[tokio::test]
async fn the_running_feed_ends_with_its_listener() {
    let server = serve(|_| fine(&document(START, "9"))).await;
    let (tell, mut told) = mpsc::channel(1);
    let running = tokio::spawn(json_feed(&server.address).run(Arc::new(clock()), 1000.0, tell));
    for _ in 0..3 {
        let event = told.recv().await.unwrap();
        assert!(matches!(event, Event::WeatherArrived(_)), "{event:?}");
    }
    drop(told);
    tokio::time::timeout(Duration::from_secs(5), running)
        .await
        .unwrap()
        .unwrap();
}

#[test]
fn waits_grow_after_failures_within_limits_and_repeat_with_the_seed() {
    let waits = |seed| {
        let mut pacing = Pacing::new(10.0, ChaCha8Rng::seed_from_u64(seed));
        let mut waits: Vec<f64> = (0..8).map(|_| pacing.wait_s(false)).collect();
        waits.push(pacing.wait_s(true));
        waits.push(pacing.wait_s(false));
        waits
    };
    let seen = waits(3);
    for (wait, least) in seen
        .iter()
        .zip([10.0, 20.0, 40.0, 80.0, 80.0, 80.0, 80.0, 80.0])
    {
        assert!((least..=least * (1.0 + JITTER)).contains(wait), "{seen:?}");
    }
    assert_eq!(seen[8], 10.0, "an answer ends the back-off");
    assert!(seen[9] < 20.0);
    assert_eq!(seen, waits(3));
    assert_ne!(seen, waits(4));
    // A slow feed is never asked less often than it is anyway.
    let mut slow = Pacing::new(600.0, ChaCha8Rng::seed_from_u64(1));
    assert!((0..5).all(|_| (600.0..=750.0).contains(&slow.wait_s(false))));
}

/// An Alpaca server in which every sensor reads `value` and is `age_s` old, save those named.
async fn alpaca(
    value: &'static str,
    odd: &[(&'static str, &'static str)],
) -> Result<WeatherSample, FeedFault> {
    let odd = odd.to_vec();
    let server = serve(move |line| {
        let line = line.to_lowercase();
        let id = line.split("clienttransactionid=").nth(1).unwrap_or("0");
        let id: String = id.chars().take_while(char::is_ascii_digit).collect();
        let envelope = |value: &str| {
            format!(
                "{{\"Value\":{value},\"ClientTransactionID\":{id},\"ServerTransactionID\":9,\
                 \"ErrorNumber\":0,\"ErrorMessage\":\"\"}}"
            )
        };
        let member = |name: &str| line.contains(&format!("/{name}?"));
        match odd.iter().find(|(part, _)| line.contains(part)) {
            Some((_, whole)) if whole.starts_with('{') => fine(whole),
            Some((_, status)) if status.starts_with("HTTP ") => answer(&status[5..], "no"),
            Some((_, value)) => fine(&envelope(value)),
            None if member("issafe") => fine(&envelope("true")),
            None if member("timesincelastupdate") => fine(&envelope("12.5")),
            None => fine(&envelope(value)),
        }
    })
    .await;
    live(FeedSource::Alpaca(AlpacaFeed {
        address: server.address,
        observing_conditions: Some(0),
        safety_monitor: Some(3),
    }))
    .poll(&clock())
    .await
}

#[tokio::test]
async fn alpaca_sensors_become_a_sample_as_old_as_the_oldest() {
    let old = "sensorname=humidity";
    let sample = alpaca("7.5", &[(old, "40.0"), ("/dewpoint?", "2.5")])
        .await
        .unwrap();
    assert_eq!(sample.at, Utc::parse(START).unwrap().plus_ms(-40_000));
    assert_eq!(sample.values[&Quantity::WindMS], 7.5);
    assert_eq!(sample.values[&Quantity::DewPointSpreadK], 5.0);
    assert_eq!(sample.safe, Some(true));
    assert_eq!(sample.values.len(), 9);
}

#[tokio::test]
async fn alpaca_stations_may_lack_sensors_and_say_unsafe() {
    let lacking = "{\"Value\":0,\"ErrorNumber\":1024,\"ErrorMessage\":\"not implemented\"}";
    let odd: &[_] = &[("/rainrate?", lacking), ("/issafe?", "false")];
    let sample = alpaca("7.5", odd).await.unwrap();
    assert!(!sample.values.contains_key(&Quantity::RainMmH));
    assert_eq!(sample.safe, Some(false));
}

#[tokio::test]
async fn alpaca_answers_other_than_200_and_error_0_are_faults() {
    let not_connected = "{\"Value\":0,\"ErrorNumber\":1031,\"ErrorMessage\":\"not connected\"}";
    let no_number = "{\"Value\":1.0}";
    let another = "{\"Value\":1.0,\"ClientTransactionID\":77777,\"ErrorNumber\":0}";
    let no_value = "{\"Value\":null,\"ErrorNumber\":0,\"ErrorMessage\":\"\"}";
    let no_age = "{\"Value\":0,\"ErrorNumber\":1024,\"ErrorMessage\":\"\"}";
    let cases: [&[(&str, &str)]; 12] = [
        &[("/issafe?", not_connected)],
        &[("/issafe?", "1")],
        &[("/issafe?", no_age)],
        &[("/windspeed?", not_connected)],
        &[("/windspeed?", no_number)],
        &[("/windspeed?", another)],
        &[("/windspeed?", no_value)],
        &[("/windspeed?", "\"7.5\"")],
        &[("/windspeed?", "HTTP 400 Bad Request")],
        &[("/windspeed?", "HTTP 500 Internal Server Error")],
        &[("sensorname=windspeed", no_age)],
        &[("sensorname=windspeed", "-1")],
    ];
    for odd in cases {
        let fault = alpaca("7.5", odd).await.unwrap_err();
        assert!(
            matches!(fault, FeedFault::Malformed(_)),
            "{odd:?}: {fault:?}"
        );
    }
}
