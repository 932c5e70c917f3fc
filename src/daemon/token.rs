//! The bearer token that everything that changes state needs.

use std::fmt;
use std::path::Path;

use subtle::ConstantTimeEq;
use thiserror::Error;

/// A token shorter than this is guessed too soon.
const SHORTEST: usize = 16;

/// A bearer token. It cannot be printed.
#[derive(Clone)]
pub struct Token(String);

/// Why there is no token.
#[derive(Debug, Error)]
pub enum TokenError {
    /// Its file cannot be read.
    #[error("the token file {file} cannot be read")]
    Unreadable {
        /// The file.
        file: String,
        /// Why.
        #[source]
        cause: std::io::Error,
    },
    /// It is too short or not of printable characters.
    #[error(
        "the token from {from} must be {SHORTEST} printable characters or more, without spaces"
    )]
    Weak {
        /// Where it came from.
        from: String,
    },
}

impl fmt::Debug for Token {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.write_str("Token(…)")
    }
}

impl Token {
    /// From the environment variable, else from the first line of the file; `None` when neither is
    /// there.
    ///
    /// # Errors
    /// [`TokenError`].
    pub fn find(variable: &str, file: Option<&str>) -> Result<Option<Self>, TokenError> {
        if let Ok(text) = std::env::var(variable) {
            return Token::checked(&text, &format!("the variable {variable}")).map(Some);
        }
        let Some(file) = file else { return Ok(None) };
        let text =
            std::fs::read_to_string(Path::new(file)).map_err(|cause| TokenError::Unreadable {
                file: file.to_owned(),
                cause,
            })?;
        let first = text.lines().next().unwrap_or_default();
        Token::checked(first, &format!("the file {file}")).map(Some)
    }

    fn checked(text: &str, from: &str) -> Result<Self, TokenError> {
        let text = text.trim();
        if text.len() < SHORTEST || !text.bytes().all(|b| b.is_ascii_graphic()) {
            return Err(TokenError::Weak {
                from: from.to_owned(),
            });
        }
        Ok(Token(text.to_owned()))
    }

    /// Whether this is it. Takes as long for a token that is wrong in its first character as for
    /// one that is wrong in its last.
    pub fn is(&self, other: &str) -> bool {
        self.0.as_bytes().ct_eq(other.as_bytes()).into()
    }

    /// The token, for the client's request.
    pub fn reveal(&self) -> &str {
        &self.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn is_compared_and_never_shown() {
        let token = Token::checked("correct-horse-battery", "here").unwrap();
        assert!(token.is("correct-horse-battery"));
        assert!(!token.is("correct-horse-batterz") && !token.is("") && !token.is("correct"));
        assert!(!format!("{token:?}").contains("horse"));
        for weak in [
            "",
            "short",
            "with a space in the middle",
            "naïve-naïve-naïve",
        ] {
            assert!(Token::checked(weak, "here").is_err(), "{weak}");
        }
    }
}
