//! The daemon as it really runs: the binary, a SQLite file, sockets on loopback, invented time.

use std::collections::BTreeMap;
use std::io::{BufRead, BufReader, Read, Write};
use std::net::TcpStream;
use std::path::Path;
use std::process::{Child, Command, Output, Stdio};
use std::time::{Duration, Instant};

use rand::{RngExt, SeedableRng};
use rand_chacha::ChaCha8Rng;
use serde_json::{Value, json};

const BINARY: &str = env!("CARGO_BIN_EXE_nightwright");
const TOKEN: &str = "an-invented-token-of-no-use";
/// Half an hour before darkness at the shipped site.
const DUSK: &str = "2026-12-01T18:00:00Z";

/// A running daemon; killed when the test ends.
struct Daemon {
    child: Child,
    address: String,
    started: Duration,
}

/// A folder with a copy of the shipped configuration, under a sky that is always clear.
struct Place(tempfile::TempDir);

impl Place {
    fn new() -> Self {
        let folder = tempfile::tempdir().expect("a scratch folder");
        let made = Command::new(BINARY)
            .args(["init", "config"])
            .current_dir(folder.path())
            .output()
            .expect("the binary runs");
        assert!(made.status.success());
        let file = folder.path().join("config/night.toml");
        let text = std::fs::read_to_string(&file).expect("a night");
        let clear = format!("clear_fraction = {:?}", [1.0; 12]);
        let lines = text
            .lines()
            .map(|line| match line.split_whitespace().next() {
                Some("clear_fraction") => clear.clone(),
                Some("night_lost") => "night_lost = 0.0".to_owned(),
                _ => line.to_owned(),
            });
        std::fs::write(&file, lines.collect::<Vec<_>>().join("\n")).expect("written");
        Place(folder)
    }

    fn path(&self) -> &Path {
        self.0.path()
    }

    fn command(&self, args: &[&str]) -> Command {
        let mut command = Command::new(BINARY);
        command
            .args(args)
            .current_dir(self.path())
            .env("NIGHTWRIGHT_TOKEN", TOKEN)
            .stdin(Stdio::null());
        command
    }

    fn ask(&self, args: &[&str]) -> Output {
        self.command(args).output().expect("the binary runs")
    }

    fn daemon(&self, clock: &str) -> Daemon {
        self.try_daemon(&["--clock", clock])
            .unwrap_or_else(|said| panic!("the daemon does not start: {said}"))
    }

    fn try_daemon(&self, more: &[&str]) -> Result<Daemon, String> {
        let log = std::fs::OpenOptions::new()
            .create(true)
            .append(true)
            .open(self.path().join("log.txt"))
            .expect("a log");
        let began = Instant::now();
        let mut child = self
            .command(&[
                "run",
                "--ledger",
                "nights.sqlite",
                "--listen",
                "127.0.0.1:0",
            ])
            .args(more)
            .stdout(Stdio::piped())
            .stderr(log)
            .spawn()
            .expect("the binary runs");
        let mut line = String::new();
        let out = child.stdout.take().expect("a pipe");
        BufReader::new(out).read_line(&mut line).expect("a line");
        match line.trim().strip_prefix("listening on http://") {
            Some(address) => Ok(Daemon {
                child,
                address: address.to_owned(),
                started: began.elapsed(),
            }),
            None => {
                let code = child.wait().expect("it ended").code();
                let log = std::fs::read_to_string(self.path().join("log.txt"));
                Err(format!("{code:?} {}", log.unwrap_or_default()))
            }
        }
    }
}

impl Daemon {
    /// One request; `None` when the daemon is gone before it answered.
    fn request(&self, head: &str, body: &str) -> Option<(u16, Value)> {
        let text = self.raw(&format!(
            "{head} HTTP/1.1\r\nhost: here\r\nconnection: close\r\ncontent-type: application/json\r\n\
             authorization: Bearer {TOKEN}\r\ncontent-length: {}\r\n\r\n{body}",
            body.len()
        ))?;
        let status = text.split(' ').nth(1)?.parse().ok()?;
        let body = text.split_once("\r\n\r\n")?.1;
        Some((status, serde_json::from_str(body).unwrap_or(Value::Null)))
    }

    fn raw(&self, bytes: &str) -> Option<String> {
        let mut stream = TcpStream::connect(&self.address).ok()?;
        stream
            .set_read_timeout(Some(Duration::from_secs(20)))
            .ok()?;
        stream.write_all(bytes.as_bytes()).ok()?;
        let mut answer = Vec::new();
        stream.read_to_end(&mut answer).ok()?;
        String::from_utf8(answer)
            .ok()
            .filter(|text| !text.is_empty())
    }

    fn post(&self, path: &str, body: &Value) -> Option<(u16, Value)> {
        self.request(&format!("POST {path}"), &body.to_string())
    }

    fn get(&self, path: &str) -> (u16, Value) {
        self.request(&format!("GET {path}"), "").expect("an answer")
    }

    fn status(&self) -> Value {
        self.get("/v1/status").1
    }

    fn claim(&self, key: &str, holder: &str) -> Option<(u16, Value)> {
        self.post("/v1/visits/claim", &json!({"key": key, "holder": holder}))
    }

    /// Waits until the status is as wanted.
    fn wait(&self, what: &str, wanted: impl Fn(&Value) -> bool) -> Value {
        let until = Instant::now() + Duration::from_secs(60);
        loop {
            let status = self.status();
            if wanted(&status) {
                return status;
            }
            assert!(Instant::now() < until, "no {what}: {status:#}");
            std::thread::sleep(Duration::from_millis(20));
        }
    }

    /// Claims until there is a visit.
    fn next(&self, key: &str) -> Value {
        let until = Instant::now() + Duration::from_secs(60);
        loop {
            match self.claim(key, "tester").expect("an answer") {
                (200, lease) => return lease,
                (409, _) => std::thread::sleep(Duration::from_millis(20)),
                other => panic!("{other:?}"),
            }
            assert!(Instant::now() < until, "no visit: {:#}", self.status());
        }
    }

    fn signal(&self, name: &str) {
        let id = self.child.id().to_string();
        let sent = Command::new("kill").args(["-s", name, &id]).status();
        assert!(sent.expect("kill runs").success());
    }

    /// Stops it as a service manager would.
    fn stop(mut self) {
        self.signal("TERM");
        let status = self.child.wait().expect("it ends");
        assert!(status.success(), "{status}");
    }

    fn kill(mut self) {
        self.child.kill().expect("it can be killed");
        self.child.wait().expect("it ends");
    }
}

impl Drop for Daemon {
    fn drop(&mut self) {
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}

fn done(key: &str) -> Value {
    json!({"key": key, "outcome": "done", "snr": 80.5, "rv_error_m_s": 1.9})
}

fn visits(place: &Place) -> Vec<Value> {
    let output = place.ask(&["log", "list", "--json", "--ledger", "nights.sqlite"]);
    assert!(output.status.success());
    let listed: Value = serde_json::from_slice(&output.stdout).expect("JSON");
    listed.as_array().expect("an array").clone()
}

fn assert_sound(place: &Place) {
    let output = place.ask(&["ledger", "check", "--ledger", "nights.sqlite"]);
    let said = String::from_utf8_lossy(&output.stdout).into_owned();
    assert!(output.status.success(), "{said}");
}

#[test]
fn visits_are_claimed_extended_and_reported_over_http() {
    let place = Place::new();
    let daemon = place.daemon(&format!("{DUSK},300"));
    let status = daemon.wait("queue", |s| s["revision"].is_u64());
    assert_eq!(status["mode"], "invented_clock");
    assert_eq!(status["night"], "2026-12-01");
    let queue = daemon.get("/v1/queue").1;
    assert!(queue["visits"].as_array().expect("visits").len() > 15);
    let file = std::fs::read_to_string(place.path().join("var/queue/queue.json")).expect("a file");
    let file: Value = serde_json::from_str(&file).expect("whole JSON");
    assert_eq!(file["night"], "2026-12-01");
    assert_eq!(file["mode"], "invented_clock");

    let lease = daemon.next("first");
    let visit = lease["visit"].as_str().expect("a name").to_owned();
    assert_eq!(lease["holder"], "tester");
    assert!(lease["star"].is_null() == (lease["kind"] == "calibration"));
    let again = daemon.claim("first", "tester").expect("an answer");
    assert_eq!((again.0, &again.1["visit"]), (200, &lease["visit"]));
    let (code, other) = daemon.claim("second", "rival").expect("an answer");
    assert_eq!(
        (code, &other["code"], &other["holder"]),
        (409, &"leased".into(), &"tester".into())
    );

    let path = format!("/v1/visits/{visit}/extend");
    let (code, extended) = daemon
        .post(&path, &json!({"seconds": 900}))
        .expect("an answer");
    assert_eq!(code, 200, "{extended}");
    assert!(extended["expires"].as_str() > lease["expires"].as_str());

    let path = format!("/v1/visits/{visit}/report");
    let (code, reported) = daemon.post(&path, &done("r1")).expect("an answer");
    assert_eq!(
        (code, &reported["outcome"], &reported["again"]),
        (200, &"done".into(), &false.into())
    );
    let (code, reported) = daemon.post(&path, &done("r1")).expect("an answer");
    assert_eq!((code, &reported["again"]), (200, &true.into()));
    let lost = json!({"key": "r2", "outcome": "lost", "cause": "weather"});
    assert_eq!(daemon.post(&path, &lost).expect("an answer").0, 409);
    let nowhere = "/v1/visits/2026-12-01-7777/report";
    assert_eq!(daemon.post(nowhere, &done("r3")).expect("an answer").0, 404);
    let earlier = "/v1/visits/2025-01-01-0001/report";
    assert_eq!(daemon.post(earlier, &done("r4")).expect("an answer").0, 404);

    daemon.stop();
    let listed = visits(&place);
    let ours: Vec<&Value> = listed
        .iter()
        .filter(|v| v["visit"] == visit.as_str())
        .collect();
    assert_eq!(ours.len(), 1, "{listed:?}");
    assert_eq!(ours[0]["outcome"], "done");
    assert_sound(&place);
}

#[test]
fn the_operator_has_a_hand_on_the_night() {
    let place = Place::new();
    let daemon = place.daemon(&format!("{DUSK},300"));
    daemon.wait("night", |s| s["state"] == "observing");
    let address = daemon.address.clone();
    let tell = |args: &[&str]| {
        let all = [&["tell", "--address", &address, "--by", "tester"], args].concat();
        place.ask(&all)
    };
    assert!(tell(&["hold", "--reason", "a visitor"]).status.success());
    let held = daemon.wait("hold", |s| s["state"] == "held");
    assert_eq!(held["holds"][0]["cause"], "operator");
    assert!(
        held["holds"][0]["detail"]
            .as_str()
            .expect("words")
            .contains("a visitor")
    );
    let (code, refused) = daemon.claim("k", "tester").expect("an answer");
    assert_eq!((code, &refused["code"]), (409, &"held".into()));
    let status = place.ask(&["status", "--address", &address]);
    assert_eq!(
        status.status.code(),
        Some(1),
        "a held night is told by the exit code"
    );
    assert!(tell(&["release"]).status.success());
    assert_eq!(
        tell(&["release"]).status.code(),
        Some(1),
        "nothing is held any more"
    );
    daemon.wait("release", |s| s["state"] == "observing");

    let queued = |star: &str| {
        let queue = daemon.get("/v1/queue").1;
        let visits = queue["visits"].as_array().expect("visits").iter();
        visits
            .filter(|v| v["kind"] == "science" && v["target"] == star)
            .count()
    };
    let queue = daemon.get("/v1/queue").1;
    let mut star = queue["visits"].as_array().expect("visits").iter();
    let star = star.rfind(|v| v["kind"] == "science").expect("a star");
    let star = star["target"].as_str().expect("a name").to_owned();
    assert_eq!(queued(&star), 1);
    assert!(
        tell(&["pause", &star, "--reason", "bad coordinates"])
            .status
            .success()
    );
    daemon.wait("pause", |s| {
        s["paused"] == json!([star]) && queued(&star) == 0
    });
    assert!(tell(&["resume", &star]).status.success());
    assert_eq!(tell(&["resume", &star]).status.code(), Some(1));
    assert_eq!(
        tell(&["pause", "Nowhere", "--reason", "x"]).status.code(),
        Some(1)
    );
    let urgent = [
        "urgent",
        &star,
        "--until",
        "2026-12-02T02:00:00Z",
        "--reason",
        "a flare",
    ];
    assert!(tell(&urgent).status.success());
    daemon.wait("urgent", |s| s["urgent"] == json!([star]));
    assert!(tell(&["note", "the dome light was on"]).status.success());
    daemon.stop();

    let export = place.ask(&[
        "ledger",
        "export",
        "out",
        "--format",
        "csv",
        "--ledger",
        "nights.sqlite",
    ]);
    assert!(export.status.success());
    let record: String = std::fs::read_dir(place.path().join("out"))
        .expect("a folder")
        .map(|file| std::fs::read_to_string(file.expect("a file").path()).expect("a text"))
        .collect();
    for word in [
        "a visitor",
        "bad coordinates",
        "a flare",
        "the dome light was on",
        "tester",
    ] {
        assert!(record.contains(word), "{word} is not on record");
    }
    assert_sound(&place);
}

#[test]
fn nothing_changes_without_the_token_and_nonsense_is_refused() {
    let place = Place::new();
    let daemon = place.daemon(&format!("{DUSK},60"));
    daemon.wait("night", |s| s["night"].is_string());
    let status = |head: &str, auth: &str, kind: &str, body: &str| {
        let text = daemon.raw(&format!(
            "{head} HTTP/1.1\r\nhost: here\r\nconnection: close\r\n{auth}{kind}content-length: {}\r\n\r\n{body}",
            body.len()
        ));
        let text = text.expect("an answer");
        text.split(' ')
            .nth(1)
            .and_then(|code| code.parse::<u16>().ok())
            .expect("a status")
    };
    let json = "content-type: application/json\r\n";
    let good = format!("authorization: Bearer {TOKEN}\r\n");
    let hold = "{\"by\":\"x\",\"reason\":\"y\"}";
    assert_eq!(status("POST /v1/hold", "", json, hold), 401);
    assert_eq!(
        status(
            "POST /v1/hold",
            "authorization: Bearer wrong\r\n",
            json,
            hold
        ),
        401
    );
    assert_eq!(status("POST /v1/hold", &good, "", hold), 415);
    assert_eq!(status("POST /v1/hold", &good, json, "{"), 400);
    assert_eq!(status("POST /v1/hold", &good, json, "{\"by\":\"x\"}"), 422);
    assert_eq!(
        status(
            "POST /v1/hold",
            &good,
            json,
            "{\"by\":\" \",\"reason\":\"y\"}"
        ),
        422
    );
    let unknown = "{\"by\":\"x\",\"reason\":\"y\",\"z\":1}";
    assert_eq!(status("POST /v1/hold", &good, json, unknown), 422);
    let long = format!("{{\"by\":\"x\",\"reason\":\"{}\"}}", "y".repeat(20_000));
    assert_eq!(status("POST /v1/hold", &good, json, &long), 413);
    assert_eq!(status("GET /v1/hold", &good, "", ""), 405);
    assert_eq!(status("GET /nowhere", "", "", ""), 404);
    let claim = "{\"key\":\"a\",\"holder\":\"b\"}";
    assert_eq!(
        status("POST /v1/visits/%ff/report", &good, json, claim),
        400
    );
    for seconds in ["-5", "1e300", "\"ten\"", "null"] {
        let body = format!("{{\"seconds\":{seconds}}}");
        let code = status("POST /v1/visits/2026-12-01-0001/extend", &good, json, &body);
        assert!((400..500).contains(&code), "{seconds}: {code}");
    }
    assert!(
        daemon.status()["holds"]
            .as_array()
            .expect("holds")
            .iter()
            .all(|h| h["cause"] != "operator")
    );
    let described = daemon.get("/v1/openapi.json").1;
    assert!(described["paths"]["/v1/visits/claim"]["post"].is_object());
    for path in ["/", "/metrics", "/healthz", "/style.css"] {
        assert_eq!(status(&format!("GET {path}"), "", "", ""), 200, "{path}");
    }
    let log = std::fs::read_to_string(place.path().join("log.txt")).expect("a log");
    assert!(!log.contains(TOKEN), "the token is in the log");
    daemon.stop();
}

#[test]
fn a_second_daemon_on_the_ledger_and_an_open_door_are_refused() {
    let place = Place::new();
    let daemon = place.daemon(&format!("{DUSK},60"));
    let second = place
        .try_daemon(&["--clock", DUSK])
        .err()
        .expect("a refusal");
    assert!(
        second.contains("Some(2)") || second.contains("Some(3)"),
        "{second}"
    );
    daemon.stop();
    let open = place
        .command(&[
            "run",
            "--ledger",
            "nights.sqlite",
            "--listen",
            "0.0.0.0:0",
            "--clock",
            DUSK,
        ])
        .env_remove("NIGHTWRIGHT_TOKEN")
        .output()
        .expect("the binary runs");
    assert_eq!(open.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&open.stderr).contains("there is no token"));
}

#[test]
fn new_settings_are_taken_in_and_bad_ones_refused() {
    let place = Place::new();
    let daemon = place.daemon(&format!("{DUSK},60"));
    daemon.wait("queue", |s| s["revision"].is_u64());
    let file = place.path().join("config/site.toml");
    let sound = std::fs::read_to_string(&file).expect("a site");
    std::fs::write(
        &file,
        sound.replace("latitude_deg = ", "latitude_deg = 123.0 # "),
    )
    .expect("written");
    daemon.signal("HUP");
    let status = daemon.wait("refusal", |s| s["settings_refused"].is_string());
    let fault = status["settings_refused"].as_str().expect("words");
    assert!(fault.contains("site.latitude_deg"), "{fault}");
    let before = status["revision"].as_u64();
    // Back again, with a change that counts: noticed without a signal.
    std::fs::write(&file, sound.replace("height_m = ", "height_m = 1500.0 # ")).expect("written");
    daemon.wait("new settings", |s| {
        s["settings_refused"].is_null() && s["revision"].as_u64() > before
    });
    daemon.stop();
}

/// A full disk, by way of the limit on the size of files (util-linux `prlimit`): nothing is
/// acknowledged that could not be kept, and all goes on when there is room again.
#[test]
fn a_full_disk_holds_the_night_and_loses_nothing() {
    let place = Place::new();
    let daemon = place.daemon(&format!("{DUSK},300"));
    let lease = daemon.next("only");
    let visit = lease["visit"].as_str().expect("a name").to_owned();
    let limit = |size: &str| {
        let id = daemon.child.id().to_string();
        let set = Command::new("prlimit")
            .args(["--pid", &id, &format!("--fsize={size}:unlimited")])
            .status();
        assert!(set.expect("prlimit runs").success());
    };
    limit("4096");
    let path = format!("/v1/visits/{visit}/report");
    let (code, refused) = daemon.post(&path, &done("r")).expect("an answer");
    assert_eq!(
        (code, &refused["code"]),
        (503, &"ledger_down".into()),
        "{refused}"
    );
    let causes = |s: &Value| {
        let holds = s["holds"].as_array().expect("holds").iter();
        holds.map(|hold| hold["cause"].clone()).collect::<Vec<_>>()
    };
    daemon.wait("hold", |s| causes(s) == ["ledger"] && s["state"] == "held");
    assert_eq!(daemon.get("/healthz").0, 503);
    assert_ne!(daemon.claim("more", "tester").expect("an answer").0, 200);
    limit("unlimited");
    daemon.wait("recovery", |s| causes(s).is_empty());
    assert_eq!(daemon.get("/healthz").0, 200);
    let (code, reported) = daemon.post(&path, &done("r")).expect("an answer");
    assert_eq!(
        (code, &reported["outcome"]),
        (200, &"done".into()),
        "{reported}"
    );
    daemon.stop();
    let listed = visits(&place);
    assert_eq!(
        listed
            .iter()
            .filter(|v| v["visit"] == visit.as_str())
            .count(),
        1
    );
    assert_sound(&place);
}

#[test]
fn a_silent_feed_holds_the_night() {
    let place = Place::new();
    // Nothing listens where the shipped configuration has its feed.
    let daemon = place
        .try_daemon(&["--clock", &format!("{DUSK},300"), "--live-weather"])
        .expect("it starts");
    let held = daemon.wait("hold", |s| s["state"] == "held");
    assert_eq!(held["holds"][0]["cause"], "feed_lost", "{held:#}");
    assert_eq!(daemon.claim("k", "tester").expect("an answer").0, 409);
    // A release is the operator's own hold's end, and nothing else's.
    let (code, _) = daemon
        .post("/v1/release", &json!({"by": "tester"}))
        .expect("an answer");
    assert_eq!(code, 409);
    assert_eq!(daemon.status()["state"], "held");
    daemon.stop();
}

#[test]
fn nights_without_darkness_pass_by() {
    let place = Place::new();
    let file = place.path().join("config/site.toml");
    let site = std::fs::read_to_string(&file).expect("a site");
    std::fs::write(
        &file,
        site.replace("latitude_deg = ", "latitude_deg = 78.0 # "),
    )
    .expect("written");
    let daemon = place.daemon("2026-06-20T12:00:00Z,40000");
    let third = daemon.wait("third night", |s| s["night"].as_str() >= Some("2026-06-22"));
    assert!(third["darkness"].is_null(), "{third:#}");
    assert_eq!(third["state"], "daylight");
    daemon.stop();
    assert_sound(&place);
}

/// Kills the daemon at random instants with claims and reports under way. `NIGHTWRIGHT_KILLS` sets
/// how often, for a longer run.
#[test]
fn what_was_acknowledged_survives_two_hundred_kills() {
    let kills: u32 = std::env::var("NIGHTWRIGHT_KILLS")
        .ok()
        .and_then(|text| text.parse().ok())
        .unwrap_or(200);
    let place = Place::new();
    let mut rng = ChaCha8Rng::seed_from_u64(20_261_201);
    let mut acknowledged: BTreeMap<String, String> = BTreeMap::new();
    let mut night = String::new();
    let mut slowest = Duration::ZERO;
    let mut number = 0;
    let evening = place.daemon("2026-12-01T17:30:00Z,600");
    evening.wait("darkness", |s| {
        s["state"] == "observing" && s["revision"].is_u64()
    });
    evening.kill();
    let start = "2026-12-01T17:30:00Z,150";
    for kill in 0..kills {
        let daemon = place.daemon(start);
        slowest = slowest.max(daemon.started);
        let until = Instant::now() + Duration::from_millis(rng.random_range(0..500));
        std::thread::scope(|scope| {
            let (daemon, acknowledged, number) = (&daemon, &mut acknowledged, &mut number);
            let busy = scope.spawn(move || {
                while let Some((code, answer)) = {
                    *number += 1;
                    daemon.claim(&format!("c{number}"), "tester")
                } {
                    let visit = match (code, answer["code"].as_str()) {
                        (200, _) => answer["visit"].as_str().expect("a name").to_owned(),
                        (409, Some("leased")) => {
                            answer["visit"].as_str().expect("a name").to_owned()
                        }
                        _ => {
                            std::thread::sleep(Duration::from_millis(10));
                            if Instant::now() > until + Duration::from_millis(500) {
                                return;
                            }
                            continue;
                        }
                    };
                    let key = format!("r-{visit}");
                    let path = format!("/v1/visits/{visit}/report");
                    match daemon.post(&path, &done(&key)) {
                        Some((200, _)) => acknowledged.insert(visit, key),
                        Some((code, answer)) => panic!("kill {kill}: {code} {answer}"),
                        None => return,
                    };
                }
            });
            while Instant::now() < until {
                std::thread::sleep(Duration::from_millis(5));
            }
            daemon.signal("KILL");
            busy.join().expect("the observatory lives on");
        });
        daemon.kill();
        if night.is_empty() && !acknowledged.is_empty() {
            night = "2026-12-01".to_owned();
        }
    }
    assert!(
        acknowledged.len() > 5,
        "only {} reports went through",
        acknowledged.len()
    );
    let daemon = place.daemon(start);
    assert_eq!(
        daemon.wait("night", |s| s["night"].is_string())["night"],
        night.as_str()
    );
    daemon.stop();
    let listed = visits(&place);
    let mut seen: BTreeMap<String, u32> = BTreeMap::new();
    for visit in &listed {
        *seen
            .entry(visit["visit"].as_str().expect("a name").to_owned())
            .or_default() += 1;
    }
    assert!(
        seen.values().all(|count| *count == 1),
        "a visit twice: {seen:?}"
    );
    for visit in acknowledged.keys() {
        let kept = listed.iter().find(|v| v["visit"] == visit.as_str());
        let kept = kept.unwrap_or_else(|| panic!("{visit} was acknowledged and is lost"));
        assert_eq!(kept["outcome"], "done", "{kept}");
    }
    assert_sound(&place);
    // Back within two seconds, on a machine that runs other tests beside: a generous multiple.
    assert!(slowest < Duration::from_secs(20), "{slowest:?}");
}
