//! Records in the primary headers of FITS files.

use std::collections::BTreeMap;
use std::fs::{self, File};
use std::io::{self, BufReader};
use std::path::{Path, PathBuf};

use fitsrs::card::{Card, Value};
use fitsrs::{Fits, HDU};

use super::instants::record;
use super::{Columns, Field, Found};

/// How deep folders of spectra are looked through; deeper ones are more likely a loop.
const DEEPEST: usize = 8;

/// The FITS files of a folder and of those within, by name.
///
/// # Errors
/// The storage's, for a folder that cannot be listed.
pub fn fits_files(folder: &Path) -> io::Result<Vec<PathBuf>> {
    let mut files = Vec::new();
    collect(folder, 0, &mut files)?;
    files.sort();
    Ok(files)
}

fn collect(folder: &Path, depth: usize, files: &mut Vec<PathBuf>) -> io::Result<()> {
    for entry in fs::read_dir(folder)? {
        let path = entry?.path();
        let extension = path.extension().and_then(|e| e.to_str()).unwrap_or("");
        if path.is_dir() {
            if depth < DEEPEST {
                collect(&path, depth + 1, files)?;
            }
        } else if ["fits", "fit", "fts"].contains(&extension.to_ascii_lowercase().as_str()) {
            files.push(path);
        }
    }
    Ok(())
}

/// Reads the record in the primary header of a FITS file.
///
/// # Errors
/// Why it holds none, in words.
pub fn read_fits(path: &Path, columns: &Columns) -> Result<Found, String> {
    let cards = header(path)?;
    let text = |field: Field| match columns.mapped(field) {
        Some(keyword) => cards.get(&keyword.to_ascii_uppercase()).cloned(),
        None => {
            let mut keywords = field.fits_keywords().iter();
            keywords.find_map(|keyword| cards.get(*keyword).cloned())
        }
    };
    record(&path.display().to_string(), text)
}

/// Keywords and values of the primary header; the first of a keyword that stands twice.
fn header(path: &Path) -> Result<BTreeMap<String, String>, String> {
    let file = File::open(path).map_err(|error| format!("it cannot be read: {error}"))?;
    let size = file
        .metadata()
        .map_err(|error| format!("it cannot be read: {error}"))?
        .len();
    let hdu = match Fits::from_reader(BufReader::new(file)).next() {
        Some(Ok(HDU::Primary(hdu))) => hdu,
        Some(Err(error)) => return Err(format!("it is no sound FITS file: {error}")),
        _ => return Err("it is no FITS file".to_owned()),
    };
    let end = hdu
        .get_data_unit_byte_offset()
        .saturating_add(hdu.get_data_unit_byte_size());
    if end > size {
        return Err(format!("it is cut short: {size} bytes of at least {end}"));
    }
    let mut cards = BTreeMap::new();
    for card in hdu.get_header().cards() {
        let (Card::Value { name, value } | Card::Hierarch { name, value }) = card else {
            continue;
        };
        let text = match value {
            Value::Integer { value, .. } => value.to_string(),
            Value::Float { value, .. } => value.to_string(),
            Value::String { value, .. } => value.trim().to_owned(),
            Value::Logical { .. } | Value::Undefined | Value::Invalid(_) => continue,
        };
        if !text.is_empty() {
            cards
                .entry(name.trim().to_ascii_uppercase())
                .or_insert(text);
        }
    }
    Ok(cards)
}
