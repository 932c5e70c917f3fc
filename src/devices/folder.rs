//! Files for people and scripts, which a reader finds whole or not at all.

use std::fs::{self, File};
use std::io::{self, Write};
use std::os::unix::fs::PermissionsExt;
use std::path::Path;

use crate::report::Rendered;
use crate::time::NightDate;

/// Writes a file beside its place first, through to the disk, then renames it over the old one, and
/// flushes the folder. The folder is made when it is not there.
///
/// # Errors
/// What the file system says; the old file is then as it was.
pub fn write_whole(folder: &Path, name: &str, bytes: &[u8]) -> io::Result<()> {
    fs::create_dir_all(folder)?;
    let mut file = tempfile::Builder::new()
        .prefix(".nightwright-")
        // As any new file: the umask takes away what the machine's owner wants taken away.
        .permissions(fs::Permissions::from_mode(0o666))
        .tempfile_in(folder)?;
    file.write_all(bytes)?;
    file.as_file().sync_all()?;
    file.persist(folder.join(name))?;
    File::open(folder)?.sync_all()
}

/// Writes a night's report into a folder as `NIGHT.txt`, `NIGHT.html` and `NIGHT.json`, each whole.
///
/// # Errors
/// What the file system says; those written before stay.
pub fn write_report(folder: &Path, night: NightDate, report: &Rendered) -> io::Result<()> {
    for (ending, text) in [
        ("txt", &report.text),
        ("html", &report.html),
        ("json", &report.json),
    ] {
        write_whole(folder, &format!("{night}.{ending}"), text.as_bytes())?;
    }
    Ok(())
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_report_is_three_whole_files_and_replaces_the_one_before() {
        let scratch = tempfile::tempdir().unwrap();
        let folder = scratch.path().join("var/reports");
        let night = NightDate::parse("2026-12-01").unwrap();
        for text in ["first", "second"] {
            let report = Rendered {
                text: text.to_owned(),
                html: format!("<p>{text}"),
                json: format!("\"{text}\""),
            };
            write_report(&folder, night, &report).unwrap();
        }
        let mut names: Vec<String> = fs::read_dir(&folder)
            .unwrap()
            .map(|entry| entry.unwrap().file_name().into_string().unwrap())
            .collect();
        names.sort();
        assert_eq!(
            names,
            ["2026-12-01.html", "2026-12-01.json", "2026-12-01.txt"]
        );
        let page = folder.join("2026-12-01.html");
        assert_eq!(fs::read_to_string(&page).unwrap(), "<p>second");
        // A folder that cannot be written is an error, and what was there stays.
        assert!(write_whole(&page, "x", b"").is_err());
        assert_eq!(fs::read_to_string(&page).unwrap(), "<p>second");
    }
}
