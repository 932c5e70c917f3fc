//! Starts everything, waits for the word to stop, stops everything in order.

use std::net::{IpAddr, SocketAddr};
use std::path::PathBuf;
use std::sync::Arc;
use std::sync::mpsc::{SyncSender, TrySendError, sync_channel};
use std::thread;
use std::time::Duration;

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use thiserror::Error;
use tokio::net::TcpListener;
use tokio::signal::unix::{SignalKind, signal};
use tokio::sync::{Notify, mpsc};

use super::board::{Board, CAUTION};
use super::files::Folders;
use super::http::{self, Face};
use super::keeper::{
    InventedWeather, Keeper, TakeUpError, make_folder_of, resumed_clock, rules_of, take_up,
};
use super::message::Message;
use super::planner::plan_all;
use super::token::{Token, TokenError};
use crate::devices::{ClientFault, LiveFeed, PushedVisits, SystemClock, Webhook};
use crate::ledger::{OpenError, SqliteLedger};
use crate::night::{Event, RunMode};
use crate::ports::{Clock, LedgerFault};
use crate::settings::Settings;
use crate::time::Utc;

/// Messages that wait for the keeper; more are refused at the door.
const INBOX: usize = 256;
/// Plans that wait for the planner: one is made, one waits.
const JOBS: usize = 2;
/// Events of feeds and commands on their way.
const EVENTS: usize = 64;
/// The configuration folder is looked at so often for a change.
const LOOK: Duration = Duration::from_secs(2);

/// Where the weather comes from.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Weather {
    /// The configured feed.
    Feed,
    /// Drawn from the climate, with this seed: in invented time.
    Invented(u64),
}

/// Reads and checks the configuration anew; the fault is told as text.
pub type Load = Box<dyn Fn() -> Result<Settings, String> + Send>;
/// Changes when a file of the configuration does.
pub type Fingerprint = Box<dyn Fn() -> u64 + Send>;

/// How the daemon is to run.
pub struct Options {
    /// The settings to begin with.
    pub settings: Settings,
    /// Reads them again.
    pub load: Load,
    /// Tells whether they changed on disk.
    pub fingerprint: Fingerprint,
    /// The ledger's file.
    pub ledger: PathBuf,
    /// Where to listen.
    pub listen: SocketAddr,
    /// Start and speed of an invented clock; `None`: the real one.
    pub clock: Option<(Utc, f64)>,
    /// Where the weather comes from.
    pub weather: Weather,
    /// Said on standard output once the daemon is ready.
    pub ready: Box<dyn Fn(SocketAddr) + Send>,
}

/// Why the daemon did not start, or stopped.
#[derive(Debug, Error)]
pub enum DaemonError {
    /// The ledger cannot be opened.
    #[error(transparent)]
    Ledger(#[from] OpenError),
    /// The ledger cannot be read.
    #[error(transparent)]
    Reading(#[from] LedgerFault),
    /// The record cannot be taken up.
    #[error(transparent)]
    TakeUp(#[from] TakeUpError),
    /// There is something wrong with the token.
    #[error(transparent)]
    Token(#[from] TokenError),
    /// Listening beyond this machine needs a token.
    #[error("{0} can be reached from other machines, and there is no token")]
    Open(SocketAddr),
    /// The address cannot be listened on.
    #[error("cannot listen on {address}")]
    Listen {
        /// The address.
        address: SocketAddr,
        /// Why.
        #[source]
        cause: std::io::Error,
    },
    /// A client of the feed or webhook cannot be made.
    #[error(transparent)]
    Client(#[from] ClientFault),
    /// The system refused something that the daemon needs.
    #[error("the system refuses {what}")]
    System {
        /// What.
        what: &'static str,
        /// Why.
        #[source]
        cause: std::io::Error,
    },
}

fn system(what: &'static str) -> impl Fn(std::io::Error) -> DaemonError {
    move |cause| DaemonError::System { what, cause }
}

/// Runs the daemon until SIGTERM or SIGINT.
///
/// # Errors
/// [`DaemonError`].
pub fn run(options: Options) -> Result<(), DaemonError> {
    let runtime = tokio::runtime::Builder::new_multi_thread()
        .worker_threads(2)
        .enable_all()
        .build()
        .map_err(system("threads"))?;
    runtime.block_on(serve(options))
}

async fn serve(options: Options) -> Result<(), DaemonError> {
    let daemon = &options.settings.daemon;
    let token = Token::find(&daemon.token_env, daemon.token_file.as_deref())?;
    if !options.listen.ip().is_loopback() && token.is_none() {
        return Err(DaemonError::Open(options.listen));
    }
    make_folder_of(&options.ledger).map_err(system("a folder for the ledger"))?;
    let ledger = SqliteLedger::open_exclusive(&options.ledger)?;
    let (clock, speed, mode): (Arc<dyn Clock + Send + Sync>, f64, RunMode) = match options.clock {
        Some((start, speed)) => {
            let clock = resumed_clock(&ledger, start, speed)?;
            (Arc::new(clock), speed, RunMode::InventedClock)
        }
        None => (Arc::new(SystemClock::start()), 1.0, RunMode::Real),
    };
    let listener =
        TcpListener::bind(options.listen)
            .await
            .map_err(|cause| DaemonError::Listen {
                address: options.listen,
                cause,
            })?;
    let address = listener.local_addr().map_err(system("an address"))?;
    let (inbox, messages) = sync_channel(INBOX);
    let (jobs, orders) = sync_channel(JOBS);
    let (events, heard) = mpsc::channel(EVENTS);
    let board = Arc::new(Board::default());
    let settings = Arc::new(options.settings);
    let parts = Parts {
        settings: Arc::clone(&settings),
        clock: Arc::clone(&clock),
        speed,
        events: events.clone(),
    };
    let (push, webhook) = parts.outward()?;
    parts.listen_to_weather(options.weather)?;
    let (machine, restarted) = take_up(&ledger, rules_of(&settings), clock.now())?;
    let keeper = Keeper {
        machine,
        ledger,
        clock,
        speed,
        mode,
        observer: settings.observer(),
        settings: Arc::clone(&settings),
        edition: 0,
        board: Arc::clone(&board),
        folders: Folders {
            queue: PathBuf::from(&settings.daemon.queue),
            reports: PathBuf::from(&settings.daemon.reports),
        },
        jobs,
        push,
        webhook,
        invented: match options.weather {
            Weather::Invented(seed) => Some(InventedWeather::new(seed)),
            Weather::Feed => None,
        },
        settings_refused: None,
        beat: watchdog(),
    };
    let runtime = tokio::runtime::Handle::current();
    let planner_inbox = inbox.clone();
    let planner_ledger = options.ledger.clone();
    spawn("planner", move || {
        plan_all(planner_ledger, orders, planner_inbox)
    })?;
    let keeping = spawn("keeper", move || {
        // Pushed commands are started from within the runtime.
        let _inside = runtime.enter();
        keeper.keep(messages, restarted);
    })?;
    tokio::spawn(pass_on(heard, inbox.clone()));
    tokio::spawn(reload(options.load, options.fingerprint, inbox.clone()));
    let closing = Arc::new(Notify::new());
    let face = Face::new(inbox.clone(), Arc::clone(&board), token, mode);
    let served = {
        let closing = Arc::clone(&closing);
        tokio::spawn(http::serve(listener, face, async move {
            closing.notified().await;
        }))
    };
    say_ready(address);
    (options.ready)(address);
    stop_signal().await.map_err(system("signals"))?;
    say(&[sd_notify::NotifyState::Stopping]);
    board.stop();
    closing.notify_one();
    // Requests under way get their answers; the keeper then stops, whatever a slow client does.
    let _ = tokio::time::timeout(Duration::from_secs(2), served).await;
    tell_to_stop(&inbox).await;
    drop(inbox);
    let joined = tokio::task::spawn_blocking(move || keeping.join()).await;
    if !matches!(joined, Ok(Ok(()))) {
        tracing::error!("the keeper did not end well");
    }
    Ok(())
}

/// What the daemon's outer parts are made from.
struct Parts {
    settings: Arc<Settings>,
    clock: Arc<dyn Clock + Send + Sync>,
    speed: f64,
    events: mpsc::Sender<Event>,
}

impl Parts {
    fn outward(&self) -> Result<(Option<PushedVisits>, Option<Webhook>), DaemonError> {
        let daemon = &self.settings.daemon;
        let survey = &self.settings.survey;
        let push = daemon.push.as_ref().map(|push| {
            PushedVisits::new(
                push.clone(),
                &daemon.token_env,
                Arc::new(survey.clone()),
                self.speed,
                self.events.clone(),
            )
        });
        let webhook = match &daemon.webhook {
            Some(url) => Some(Webhook::to(url, &survey.name, Arc::clone(&self.clock))?),
            None => None,
        };
        Ok((push, webhook))
    }

    fn listen_to_weather(&self, weather: Weather) -> Result<(), DaemonError> {
        let (Weather::Feed, Some(feed)) = (weather, &self.settings.daemon.feed) else {
            return Ok(());
        };
        // Jitter alone hangs on it: daemons that start together must not ask together.
        let jitter = u64::from(std::process::id());
        let live = LiveFeed::new(feed, ChaCha8Rng::seed_from_u64(jitter))?;
        let (clock, told) = (Arc::clone(&self.clock), self.events.clone());
        tokio::spawn(live.run(clock, self.speed, told));
        Ok(())
    }
}

fn spawn(
    name: &str,
    work: impl FnOnce() + Send + 'static,
) -> Result<thread::JoinHandle<()>, DaemonError> {
    thread::Builder::new()
        .name(name.to_owned())
        .spawn(work)
        .map_err(system("threads"))
}

/// Carries events from feeds and commands to the keeper, waiting when it is busy.
async fn pass_on(mut heard: mpsc::Receiver<Event>, inbox: SyncSender<Message>) {
    while let Some(event) = heard.recv().await {
        if !send(&inbox, Message::Event(event)).await {
            return;
        }
    }
}

/// `false` when the keeper is gone.
async fn send(inbox: &SyncSender<Message>, mut message: Message) -> bool {
    loop {
        match inbox.try_send(message) {
            Ok(()) => return true,
            Err(TrySendError::Disconnected(_)) => return false,
            Err(TrySendError::Full(back)) => {
                message = back;
                tokio::time::sleep(Duration::from_millis(20)).await;
            }
        }
    }
}

async fn tell_to_stop(inbox: &SyncSender<Message>) {
    let told = send(inbox, Message::Stop);
    let _ = tokio::time::timeout(Duration::from_secs(5), told).await;
}

/// Reads the settings again on SIGHUP and when a file changed.
async fn reload(load: Load, fingerprint: Fingerprint, inbox: SyncSender<Message>) {
    let Ok(mut hangup) = signal(SignalKind::hangup()) else {
        tracing::warn!("SIGHUP cannot be heard: restart to take in new settings");
        return;
    };
    let mut known = fingerprint();
    loop {
        let asked = tokio::select! {
            _ = hangup.recv() => true,
            () = tokio::time::sleep(LOOK) => false,
        };
        let now = fingerprint();
        if !asked && now == known {
            continue;
        }
        known = now;
        let settings = load().map(Box::new);
        if !send(&inbox, Message::Settings(settings)).await {
            return;
        }
    }
}

async fn stop_signal() -> std::io::Result<()> {
    let mut term = signal(SignalKind::terminate())?;
    let mut int = signal(SignalKind::interrupt())?;
    tokio::select! {
        _ = term.recv() => {}
        _ = int.recv() => {}
    }
    Ok(())
}

fn say_ready(address: SocketAddr) {
    let at = match address.ip() {
        IpAddr::V4(ip) if ip.is_loopback() => "this machine alone".to_owned(),
        ip => ip.to_string(),
    };
    tracing::info!(%address, reached_from = at, "ready");
    tracing::info!("{CAUTION}");
    say(&[sd_notify::NotifyState::Ready]);
}

/// Tells the service manager, when there is one.
fn say(states: &[sd_notify::NotifyState<'_>]) {
    if let Err(error) = sd_notify::notify(states) {
        tracing::debug!(%error, "the service manager cannot be told");
    }
}

/// Feeds the service manager's watchdog from within the loop, when it wants to be fed.
fn watchdog() -> Box<dyn FnMut() + Send> {
    match sd_notify::watchdog_enabled() {
        Some(_) => Box::new(|| say(&[sd_notify::NotifyState::Watchdog])),
        None => Box::new(|| {}),
    }
}
