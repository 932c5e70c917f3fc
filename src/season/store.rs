//! Ended realisations on disk: a season can be stopped, gone on with, and split over machines.

use std::fs;
use std::io::{self, Write};
use std::path::{Path, PathBuf};

use serde::Serialize;
use serde::de::DeserializeOwned;
use thiserror::Error;

use super::frame::{Frame, LAYOUT};
use super::realised::Realised;

/// The file of the frame.
const FRAME: &str = "season.json";

/// What is wrong with a folder of realisations.
#[derive(Debug, Error)]
pub enum StoreError {
    /// The machine does not let it.
    #[error("{path} cannot be {what}")]
    Io {
        /// The file or folder.
        path: String,
        /// Read or written.
        what: &'static str,
        /// Why.
        #[source]
        cause: io::Error,
    },
    /// A file is not what it should be.
    #[error("{path} is no file of a season, or is damaged")]
    Damaged {
        /// The file.
        path: String,
        /// Where.
        #[source]
        cause: serde_json::Error,
    },
    /// The folder holds another season.
    #[error("{path} holds another season: {difference}")]
    Another {
        /// The folder.
        path: String,
        /// What differs.
        difference: String,
    },
    /// There is nothing in it.
    #[error("{path} holds no season")]
    Empty {
        /// The folder.
        path: String,
    },
}

/// A folder of ended realisations of one season.
#[derive(Clone, Debug)]
pub struct Store {
    folder: PathBuf,
}

impl Store {
    /// Opens or makes a folder for a season.
    ///
    /// # Errors
    /// [`StoreError`], when it holds another season for one.
    pub fn open(folder: &Path, frame: &Frame) -> Result<Self, StoreError> {
        let store = Store {
            folder: folder.to_owned(),
        };
        fs::create_dir_all(folder).map_err(|cause| failed(folder, "written", cause))?;
        match store.read_file::<Frame>(FRAME)? {
            Some(kept) => store.same(&kept, frame)?,
            None => store.write_file(FRAME, frame)?,
        }
        Ok(store)
    }

    /// Everything in one or more folders of one season, each realisation once, in order.
    ///
    /// # Errors
    /// [`StoreError`], when the folders hold different seasons for one.
    pub fn merge(folders: &[PathBuf]) -> Result<(Frame, Vec<Realised>), StoreError> {
        let mut frame: Option<Frame> = None;
        let mut all: Vec<Realised> = Vec::new();
        for folder in folders {
            let store = Store {
                folder: folder.clone(),
            };
            let Some(kept) = store.read_file::<Frame>(FRAME)? else {
                return Err(StoreError::Empty {
                    path: folder.display().to_string(),
                });
            };
            match &frame {
                Some(frame) => store.same(&kept, frame)?,
                None => frame = Some(kept),
            }
            for number in store.numbers()? {
                if let Some(realised) = store.read(number)? {
                    all.push(realised);
                }
            }
        }
        all.sort_by_key(|realised| realised.number);
        all.dedup_by_key(|realised| realised.number);
        match frame.filter(|_| !all.is_empty()) {
            Some(frame) => Ok((frame, all)),
            None => Err(StoreError::Empty {
                path: folders
                    .first()
                    .map_or(String::new(), |f| f.display().to_string()),
            }),
        }
    }

    /// A realisation that was kept.
    ///
    /// # Errors
    /// [`StoreError`].
    pub fn read(&self, number: u32) -> Result<Option<Realised>, StoreError> {
        self.read_file(&name_of(number))
    }

    /// Keeps a realisation.
    ///
    /// # Errors
    /// [`StoreError`].
    pub fn write(&self, realised: &Realised) -> Result<(), StoreError> {
        self.write_file(&name_of(realised.number), realised)
    }

    fn same(&self, kept: &Frame, wanted: &Frame) -> Result<(), StoreError> {
        let differences = [
            ("its layout", kept.layout != LAYOUT),
            ("its first night", kept.first != wanted.first),
            ("its number of nights", kept.nights != wanted.nights),
            ("its seed", kept.seed != wanted.seed),
            ("the program's version", kept.version != wanted.version),
            (
                "its settings, visits before or weather record",
                kept.fingerprint != wanted.fingerprint,
            ),
        ];
        match differences.iter().find(|(_, differs)| *differs) {
            None => Ok(()),
            Some((what, _)) => Err(StoreError::Another {
                path: self.folder.display().to_string(),
                difference: format!("{what} differs"),
            }),
        }
    }

    fn numbers(&self) -> Result<Vec<u32>, StoreError> {
        let listed = fs::read_dir(&self.folder)
            .and_then(|entries| entries.collect::<io::Result<Vec<_>>>())
            .map_err(|cause| failed(&self.folder, "read", cause))?;
        let number = |entry: &fs::DirEntry| {
            let name = entry.file_name().into_string().ok()?;
            let digits = name.strip_prefix("realisation-")?.strip_suffix(".json")?;
            digits.parse().ok()
        };
        let mut numbers: Vec<u32> = listed.iter().filter_map(number).collect();
        numbers.sort_unstable();
        Ok(numbers)
    }

    fn read_file<T: DeserializeOwned>(&self, name: &str) -> Result<Option<T>, StoreError> {
        let path = self.folder.join(name);
        let text = match fs::read(&path) {
            Ok(text) => text,
            Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(None),
            Err(cause) => return Err(failed(&path, "read", cause)),
        };
        let parsed = serde_json::from_slice(&text);
        parsed.map(Some).map_err(|cause| StoreError::Damaged {
            path: path.display().to_string(),
            cause,
        })
    }

    /// Beside it first, then renamed over it: an interruption leaves no half file.
    fn write_file<T: Serialize>(&self, name: &str, content: &T) -> Result<(), StoreError> {
        let path = self.folder.join(name);
        let write = || -> io::Result<()> {
            let mut file = tempfile::Builder::new().tempfile_in(&self.folder)?;
            serde_json::to_writer(io::BufWriter::new(&mut file), content)?;
            file.flush()?;
            file.as_file().sync_all()?;
            file.persist(&path)?;
            Ok(())
        };
        write().map_err(|cause| failed(&path, "written", cause))
    }
}

fn name_of(number: u32) -> String {
    format!("realisation-{number:06}.json")
}

fn failed(path: &Path, what: &'static str, cause: io::Error) -> StoreError {
    StoreError::Io {
        path: path.display().to_string(),
        what,
        cause,
    }
}

/// The realisations of shard `number` of `of` (1 ≤ number ≤ of): every of-th one, so that shards
/// are of one size and any number of realisations can be added later.
pub fn shard(realisations: u32, number: u32, of: u32) -> Vec<u32> {
    let mine = |n: &u32| n % of.max(1) == number.saturating_sub(1);
    (0..realisations).filter(mine).collect()
}
