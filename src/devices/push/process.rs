//! One run of the command, from its start to the end of everything it has started.

use std::io;
use std::process::{ExitStatus, Stdio};
use std::sync::{Arc, Mutex, PoisonError};
use std::time::Duration;

use rustix::process::{Pid, Signal, kill_process_group, test_kill_process_group};
use tokio::io::{AsyncRead, AsyncReadExt, AsyncWriteExt};
use tokio::process::{Child, Command};
use tokio::sync::oneshot;
use tokio::task::JoinHandle;
use tokio::time;

use crate::record::LossCause;

/// Longest outcome that is read, bytes.
const LARGEST_OUTPUT: usize = 64 * 1024;
/// Of what the command says on standard error so many lines of so many bytes reach the log.
const MOST_LINES: usize = 500;
const LONGEST_LINE: usize = 500;
/// What the command has started and left behind gets so long to end when it is asked to.
const LEFTOVERS: Duration = Duration::from_secs(2);
/// Once nothing of the command is left, its output is there at once, unless something that left
/// its process group holds on to it.
const OUTPUT: Duration = Duration::from_secs(1);
/// How often a process group is looked at.
const LOOK: Duration = Duration::from_millis(25);

/// How long it may take.
#[derive(Clone, Copy)]
pub(super) struct Limits {
    /// The run itself.
    pub(super) run: Duration,
    /// From being asked to stop to being killed.
    pub(super) grace: Duration,
}

/// Why it ended.
pub(super) enum Why {
    /// By itself.
    Exited(ExitStatus),
    /// It was told to.
    Stopped(LossCause),
    /// It ran too long.
    OutOfTime,
    /// The system does not say.
    Unknown(io::Error),
}

/// The end of a run.
pub(super) struct Ended {
    pub(super) why: Why,
    /// What it said on standard output.
    pub(super) output: Vec<u8>,
    /// There was more than is read.
    pub(super) cut: bool,
}

/// A command that runs.
pub(super) struct Running {
    child: Child,
    group: Option<Pid>,
    output: Arc<Mutex<Output>>,
    reader: JoinHandle<()>,
    visit: String,
}

#[derive(Default)]
struct Output {
    bytes: Vec<u8>,
    cut: bool,
}

impl Running {
    /// Starts the command in a process group of its own, and writes `input` to it.
    pub(super) fn start(
        command: &[String],
        hidden_variable: &str,
        visit: String,
        input: String,
    ) -> io::Result<Self> {
        let (program, arguments) = command
            .split_first()
            .ok_or_else(|| io::Error::other("no program is named"))?;
        let mut child = Command::new(program)
            .args(arguments)
            .env_remove(hidden_variable)
            .process_group(0)
            .stdin(Stdio::piped())
            .stdout(Stdio::piped())
            .stderr(Stdio::piped())
            .kill_on_drop(true)
            .spawn()?;
        if let Some(mut stdin) = child.stdin.take() {
            tokio::spawn(async move {
                // A command that does not read its input is its own affair.
                let _ = stdin.write_all(input.as_bytes()).await;
            });
        }
        if let Some(stderr) = child.stderr.take() {
            tokio::spawn(log_lines(stderr, visit.clone()));
        }
        let output = Arc::new(Mutex::new(Output::default()));
        let reader = match child.stdout.take() {
            Some(stdout) => tokio::spawn(collect(stdout, Arc::clone(&output))),
            None => tokio::spawn(async {}),
        };
        let id = child.id().and_then(|id| i32::try_from(id).ok());
        Ok(Running {
            group: id.and_then(Pid::from_raw),
            child,
            output,
            reader,
            visit,
        })
    }

    /// Waits for its end, or brings it about: when the time is up or `stop` says so, the whole
    /// process group is asked to end, and killed when the grace is over.
    pub(super) async fn until_end(
        mut self,
        limits: Limits,
        stop: &mut oneshot::Receiver<LossCause>,
    ) -> Ended {
        let why = tokio::select! {
            biased;
            status = self.child.wait() => match status {
                Ok(status) => Why::Exited(status),
                Err(error) => Why::Unknown(error),
            },
            cause = stop => Why::Stopped(cause.unwrap_or(LossCause::Other)),
            () = time::sleep(limits.run) => Why::OutOfTime,
        };
        if !matches!(why, Why::Exited(_)) {
            self.signal(Signal::TERM);
            if time::timeout(limits.grace, self.child.wait())
                .await
                .is_err()
            {
                self.signal(Signal::KILL);
                // SIGKILL cannot be refused, but a process that hangs in a device driver dies only
                // when the driver lets go: it is not waited for without end.
                let _ = time::timeout(LEFTOVERS, self.child.wait()).await;
            }
        }
        self.clear_group().await;
        if time::timeout(OUTPUT, &mut self.reader).await.is_err() {
            self.reader.abort();
        }
        let mut output = self.output.lock().unwrap_or_else(PoisonError::into_inner);
        Ended {
            why,
            output: std::mem::take(&mut output.bytes),
            cut: output.cut,
        }
    }

    /// Ends what the command has started and left behind in its process group. The number of an
    /// empty group could in theory be given to a new one between the look and the signal; process
    /// numbers go round once before one comes again, so that does not happen within microseconds.
    async fn clear_group(&self) {
        if !self.group_lives() {
            return;
        }
        tracing::warn!(visit = %self.visit, "the command left processes behind: ending them");
        self.signal(Signal::TERM);
        let gone = async {
            while self.group_lives() {
                time::sleep(LOOK).await;
            }
        };
        if time::timeout(LEFTOVERS, gone).await.is_err() {
            self.signal(Signal::KILL);
        }
    }

    fn group_lives(&self) -> bool {
        self.group
            .is_some_and(|group| test_kill_process_group(group).is_ok())
    }

    fn signal(&self, signal: Signal) {
        if let Some(group) = self.group {
            // An error: nothing of the group is left.
            let _ = kill_process_group(group, signal);
        }
    }
}

/// Reads to the end, and keeps the beginning: a command that is not read from would stand still.
async fn collect(mut from: impl AsyncRead + Unpin, into: Arc<Mutex<Output>>) {
    let mut piece = vec![0; 4096];
    while let Ok(read @ 1..) = from.read(&mut piece).await {
        let mut output = into.lock().unwrap_or_else(PoisonError::into_inner);
        let room = LARGEST_OUTPUT - output.bytes.len().min(LARGEST_OUTPUT);
        output.bytes.extend(piece.iter().take(read.min(room)));
        output.cut |= read > room;
    }
}

async fn log_lines(mut from: impl AsyncRead + Unpin, visit: String) {
    let mut lines = Lines::default();
    let mut piece = vec![0; 4096];
    while let Ok(read @ 1..) = from.read(&mut piece).await {
        for byte in piece.iter().take(read) {
            if let Some(line) = lines.take(*byte) {
                tracing::info!(%visit, "command: {line}");
            }
        }
    }
    if let Some(line) = lines.take(b'\n') {
        tracing::info!(%visit, "command: {line}");
    }
}

/// Cuts what comes in into lines for the log: printable, of bounded length and number.
#[derive(Default)]
struct Lines {
    line: Vec<u8>,
    told: usize,
}

impl Lines {
    fn take(&mut self, byte: u8) -> Option<String> {
        if byte != b'\n' {
            if self.line.len() < LONGEST_LINE {
                self.line.push(byte);
            }
            return None;
        }
        let line = std::mem::take(&mut self.line);
        let text = String::from_utf8_lossy(&line);
        let text: String = text.chars().filter(|c| !c.is_control()).collect();
        if text.is_empty() || self.told > MOST_LINES {
            return None;
        }
        self.told += 1;
        if self.told > MOST_LINES {
            return Some("(further lines are not logged)".to_owned());
        }
        Some(text)
    }
}

#[cfg(test)]
mod line_tests {
    use super::*;

    #[test]
    fn lines_are_printable_and_bounded_in_length_and_number() {
        let mut lines = Lines::default();
        let mut feed =
            |text: &str| -> Vec<String> { text.bytes().filter_map(|b| lines.take(b)).collect() };
        assert_eq!(feed("slew\x1b[31m ok\r\n\nnext"), ["slew[31m ok"]);
        assert_eq!(feed("\n"), ["next"]);
        assert_eq!(
            feed(&format!("{}\n", "x".repeat(9000)))[0].len(),
            LONGEST_LINE
        );
        let many = feed(&"again\n".repeat(2 * MOST_LINES));
        assert_eq!(many.len(), MOST_LINES - 3 + 1);
        assert_eq!(
            many.last().map(String::as_str),
            Some("(further lines are not logged)")
        );
    }
}
