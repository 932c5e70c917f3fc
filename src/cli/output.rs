//! Standard output and error, without a panic when the reader has gone.

use std::io::{self, Write};
use std::path::Path;

use super::Trouble;

/// Prints a text to standard output, with a line break at its end. A reader that has gone away
/// (`| head`) is no trouble.
///
/// # Errors
/// [`Trouble`] when standard output cannot be written for another reason, as on a full disk.
pub fn print(text: &str) -> Result<(), Trouble> {
    let end: &[u8] = if text.ends_with('\n') { b"" } else { b"\n" };
    print_pieces([text.as_bytes(), end])
}

/// Prints pieces one after the other, for what is too long to be held as one text.
///
/// # Errors
/// As [`print()`].
pub fn print_pieces(pieces: impl IntoIterator<Item = impl AsRef<[u8]>>) -> Result<(), Trouble> {
    let mut out = io::BufWriter::new(io::stdout().lock());
    let written = pieces
        .into_iter()
        .try_for_each(|piece| out.write_all(piece.as_ref()))
        .and_then(|()| out.flush());
    match written {
        Err(error) if error.kind() != io::ErrorKind::BrokenPipe => {
            Err(Trouble::machine("standard output cannot be written").because(&error))
        }
        _ => Ok(()),
    }
}

/// Prints a value as JSON to standard output.
///
/// # Errors
/// As [`print()`].
pub fn print_json(value: &serde_json::Value) -> Result<(), Trouble> {
    print(&format!("{value:#}"))
}

/// Writes a file whole: beside it first, through to the disk, then renamed over it. A reader finds
/// the old text or the new one, never a part.
///
/// # Errors
/// [`Trouble`] when the folder or the disk does not let it.
pub fn write_whole(path: &Path, text: &str) -> Result<(), Trouble> {
    let folder = match path.parent() {
        Some(parent) if !parent.as_os_str().is_empty() => parent,
        _ => Path::new("."),
    };
    let write = || -> io::Result<()> {
        let mut builder = tempfile::Builder::new();
        // Pages and queues are for others to read, as far as the user's mask lets them; a scratch
        // file is not by itself.
        #[cfg(unix)]
        builder.permissions(std::os::unix::fs::PermissionsExt::from_mode(0o666));
        let mut file = builder.tempfile_in(folder)?;
        file.write_all(text.as_bytes())?;
        file.as_file().sync_all()?;
        file.persist(path)?;
        Ok(())
    };
    write().map_err(|error| {
        Trouble::machine(format!("{} cannot be written", path.display())).because(&error)
    })
}

/// Columns that a report for people fits into.
pub const COLUMNS: usize = 100;

/// A text broken into indented lines of at most [`COLUMNS`], each with its line break. A word that
/// is longer stands alone on its line.
pub fn wrapped(text: &str, indent: usize) -> String {
    let mut lines = String::new();
    let mut used = 0;
    for word in text.split_whitespace() {
        let length = word.chars().count();
        if used > 0 && used + 1 + length <= COLUMNS {
            lines.push(' ');
            used += 1 + length;
            lines.push_str(word);
            continue;
        }
        if used > 0 {
            lines.push('\n');
        }
        lines.extend(std::iter::repeat_n(' ', indent));
        lines.push_str(word);
        used = indent + length;
    }
    lines.push('\n');
    lines
}

/// Prints a text to standard error. When even that fails, nobody is left to be told.
pub fn complain(text: &str) {
    let _ = writeln!(io::stderr().lock(), "{text}");
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn long_texts_are_broken_between_words() {
        let text = "star ".repeat(60);
        let lines = wrapped(&text, 8);
        assert!(lines.lines().all(|line| line.starts_with("        star")));
        assert!(lines.lines().all(|line| line.len() <= COLUMNS));
        assert_eq!(lines.split_whitespace().count(), 60);
        assert_eq!(wrapped("short", 2), "  short\n");
        let long = "x".repeat(150);
        assert_eq!(
            wrapped(&format!("a {long} b"), 0),
            format!("a\n{long}\nb\n")
        );
    }
}
