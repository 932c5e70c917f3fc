//! What went wrong, for people, and the exit codes.

use std::error::Error;
use std::fmt;
use std::process::ExitCode;

/// How the program ends.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Exit {
    /// 0: all is well.
    Fine,
    /// 1: the question was answered, and the answer is no.
    No,
    /// 2: a mistake in the arguments, the settings or another input.
    Misuse,
    /// 3: disk, network or another part of the machine failed.
    Machine,
}

impl Exit {
    /// The number.
    pub const fn code(self) -> u8 {
        match self {
            Exit::Fine => 0,
            Exit::No => 1,
            Exit::Misuse => 2,
            Exit::Machine => 3,
        }
    }
}

impl From<Exit> for ExitCode {
    fn from(exit: Exit) -> ExitCode {
        ExitCode::from(exit.code())
    }
}

/// Why a command did not do what was asked.
#[derive(Debug)]
pub struct Trouble {
    /// How the program ends.
    pub exit: Exit,
    /// Lines of detail that come before the message.
    details: Vec<String>,
    message: String,
    causes: Vec<String>,
    hint: Option<String>,
}

impl Trouble {
    /// A mistake in what the program was given: exit code 2.
    pub fn misuse(message: impl Into<String>) -> Self {
        Trouble::new(Exit::Misuse, message)
    }

    /// A failure of the machine: exit code 3.
    pub fn machine(message: impl Into<String>) -> Self {
        Trouble::new(Exit::Machine, message)
    }

    /// With the exit code given.
    pub fn new(exit: Exit, message: impl Into<String>) -> Self {
        Trouble {
            exit,
            details: Vec::new(),
            message: message.into(),
            causes: Vec::new(),
            hint: None,
        }
    }

    /// An error as it is, with its causes to the end of the chain.
    pub fn from_error(exit: Exit, error: &dyn Error) -> Self {
        let mut trouble = Trouble::new(exit, error.to_string());
        if let Some(source) = error.source() {
            trouble = trouble.because(source);
        }
        trouble
    }

    /// Adds a cause and the causes beneath it.
    pub fn because(mut self, cause: &dyn Error) -> Self {
        let mut next = Some(cause);
        while let Some(error) = next {
            self.causes.push(error.to_string());
            next = error.source();
        }
        self
    }

    /// Adds what to do about it.
    pub fn hint(mut self, hint: impl Into<String>) -> Self {
        self.hint = Some(hint.into());
        self
    }

    /// Adds lines to come before the message.
    pub fn details(mut self, lines: Vec<String>) -> Self {
        self.details = lines;
        self
    }
}

impl fmt::Display for Trouble {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        for line in &self.details {
            writeln!(f, "{line}")?;
        }
        write!(f, "error: {}", self.message)?;
        for cause in &self.causes {
            write!(f, "\n  because: {cause}")?;
        }
        if let Some(hint) = &self.hint {
            write!(f, "\n  hint: {hint}")?;
        }
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn tells_the_whole_chain_and_the_hint_apart() {
        #[derive(Debug, thiserror::Error)]
        #[error("outer 7")]
        struct Outer(#[source] std::io::Error);
        let error = Outer(std::io::Error::other("inner"));
        let trouble = Trouble::from_error(Exit::Machine, &error).hint("mend it");
        assert_eq!(
            trouble.to_string(),
            "error: outer 7\n  because: inner\n  hint: mend it"
        );
    }
}
