//! `init`: a commented starter of the configuration folder.

use std::fs::{self, OpenOptions};
use std::io::{self, Write};
use std::os::unix::fs::OpenOptionsExt;
use std::path::{Path, PathBuf};

use super::{Exit, Global, Trouble, output};

/// Write a commented starter configuration: an invented site, instrument and list of stars that
/// work as they are. Never overwrites anything.
#[derive(Debug, clap::Args)]
#[command(after_help = "Example:
  nightwright init my-survey
  nightwright check --config my-survey")]
pub struct Args {
    /// Folder to write to: a new one, or an empty one
    dir: PathBuf,
}

/// The shipped configuration itself, so that the starter cannot differ from it.
const STARTER: [(&str, &str); 7] = [
    ("site.toml", include_str!("../../config/site.toml")),
    (
        "observatory.toml",
        include_str!("../../config/observatory.toml"),
    ),
    ("survey.toml", include_str!("../../config/survey.toml")),
    ("night.toml", include_str!("../../config/night.toml")),
    ("targets.toml", include_str!("../../config/targets.toml")),
    (
        "finals2000A.txt",
        include_str!("../../config/finals2000A.txt"),
    ),
    ("carry-out.sh", include_str!("../../config/carry-out.sh")),
];

/// Runs the command.
pub fn run(args: &Args, _global: &Global) -> Result<Exit, Trouble> {
    let dir = &args.dir;
    make_empty_folder(dir)?;
    for (name, text) in STARTER {
        let path = dir.join(name);
        write_new(&path, text).map_err(|error| {
            Trouble::machine(format!("{} cannot be written", path.display())).because(&error)
        })?;
    }
    let names: Vec<&str> = STARTER.iter().map(|(name, _)| *name).collect();
    output::print(&format!(
        "wrote {} into {}\nnext: describe your own site in {}, then `nightwright check --config {}`",
        names.join(", "),
        dir.display(),
        dir.join("site.toml").display(),
        dir.display()
    ))?;
    Ok(Exit::Fine)
}

fn make_empty_folder(dir: &Path) -> Result<(), Trouble> {
    let shown = dir.display();
    let unwritable = |error: &io::Error| {
        Trouble::machine(format!("the folder {shown} cannot be made")).because(error)
    };
    match fs::read_dir(dir) {
        Ok(mut entries) => match entries.next() {
            None => Ok(()),
            Some(_) => Err(Trouble::misuse(format!(
                "{shown} is not empty, and nothing is overwritten"
            ))
            .hint("name a folder that does not exist yet")),
        },
        Err(error) if error.kind() == io::ErrorKind::NotFound => {
            fs::create_dir_all(dir).map_err(|error| unwritable(&error))
        }
        Err(error) if error.kind() == io::ErrorKind::NotADirectory => {
            Err(Trouble::misuse(format!("{shown} is a file, not a folder"))
                .hint("name a folder that does not exist yet"))
        }
        Err(error) => Err(unwritable(&error)),
    }
}

/// Writes a file that must not exist yet, through to the disk. A script may be run; the umask takes
/// away what the machine's owner wants taken away.
fn write_new(path: &Path, text: &str) -> io::Result<()> {
    let script = path.extension().is_some_and(|extension| extension == "sh");
    let mut file = OpenOptions::new()
        .write(true)
        .create_new(true)
        .mode(if script { 0o777 } else { 0o666 })
        .open(path)?;
    file.write_all(text.as_bytes())?;
    file.sync_all()
}
