//! The shapes in which facts are kept on disk, apart from the values in memory: a field renamed in
//! the code must not change a file. Conversions go both ways and lose nothing.

mod fact;
mod plan;
mod target;
mod visit;

use std::fmt;

use serde::de::{self, Visitor};
use serde::{Deserialize, Deserializer, Serialize, Serializer};
use thiserror::Error;

use super::labels::UnknownLabel;
use crate::time::{NightDate, NightDateError, Span, Utc};

pub(super) use fact::{decode, encode, kind_of};
pub(super) use target::target_body;
pub(super) use visit::darkness_parts;

/// Why a row on disk is no fact.
#[derive(Debug, Error)]
pub(super) enum RowError {
    #[error("not the expected shape: {0}")]
    Shape(#[from] serde_json::Error),
    #[error(transparent)]
    Label(#[from] UnknownLabel),
    #[error(transparent)]
    Night(#[from] NightDateError),
}

/// A number that JSON may have no word for: those stand as text.
#[derive(Clone, Copy, Debug)]
pub(super) struct Num(pub(super) f64);

impl Serialize for Num {
    fn serialize<S: Serializer>(&self, serializer: S) -> Result<S::Ok, S::Error> {
        if self.0.is_finite() {
            serializer.serialize_f64(self.0)
        } else {
            serializer.serialize_str(&self.0.to_string())
        }
    }
}

impl<'de> Deserialize<'de> for Num {
    fn deserialize<D: Deserializer<'de>>(deserializer: D) -> Result<Self, D::Error> {
        struct NumVisitor;
        impl Visitor<'_> for NumVisitor {
            type Value = Num;
            fn expecting(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
                f.write_str("a number, or 'NaN', 'inf' or '-inf'")
            }
            fn visit_f64<E: de::Error>(self, value: f64) -> Result<Num, E> {
                Ok(Num(value))
            }
            fn visit_i64<E: de::Error>(self, value: i64) -> Result<Num, E> {
                Ok(Num(value as f64))
            }
            fn visit_u64<E: de::Error>(self, value: u64) -> Result<Num, E> {
                Ok(Num(value as f64))
            }
            fn visit_str<E: de::Error>(self, text: &str) -> Result<Num, E> {
                text.parse().map(Num).map_err(de::Error::custom)
            }
        }
        deserializer.deserialize_any(NumVisitor)
    }
}

fn num(value: Option<f64>) -> Option<Num> {
    value.map(Num)
}

fn float(value: Option<Num>) -> Option<f64> {
    value.map(|n| n.0)
}

fn utc(unix_ms: i64) -> Utc {
    Utc::from_unix_ms(unix_ms)
}

/// A span on disk.
#[derive(Clone, Copy, Debug, Serialize, Deserialize)]
struct SpanRow {
    start_unix_ms: i64,
    end_unix_ms: i64,
}

impl From<Span> for SpanRow {
    fn from(span: Span) -> Self {
        SpanRow {
            start_unix_ms: span.start.unix_ms(),
            end_unix_ms: span.end.unix_ms(),
        }
    }
}

impl From<SpanRow> for Span {
    fn from(row: SpanRow) -> Self {
        Span::new(utc(row.start_unix_ms), utc(row.end_unix_ms))
    }
}

fn night(text: &str) -> Result<NightDate, RowError> {
    Ok(NightDate::parse(text)?)
}
