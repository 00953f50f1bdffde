//! Tokens: who may look and who may change.
//!
//! Owns the reading of the token file and the comparing. What must hold: comparing takes as long for
//! a wrong token as for a right one of the same length, and every token is compared. Deliberately
//! absent: sessions and cookies (that is `sessions`), and what a request needs (that is `access`).

use std::path::{Path, PathBuf};

use subtle::ConstantTimeEq;

/// What a token allows.
#[derive(Clone, Copy, Debug, Default, PartialEq, Eq)]
pub struct Rights {
    /// Pages, reading interface and metrics.
    pub look: bool,
    /// Changing requests.
    pub act: bool,
}

impl Rights {
    /// What several matching lines allow together.
    fn and(self, other: Self) -> Self {
        Self {
            look: self.look || other.look,
            act: self.act || other.act,
        }
    }
}

/// Why the token file cannot be used.
#[derive(Clone, Debug, PartialEq, Eq, thiserror::Error)]
pub enum TokenError {
    /// It cannot be read.
    #[error("the token file {} cannot be read: {why}", file.display())]
    Unreadable {
        /// The file.
        file: PathBuf,
        /// What the system says.
        why: String,
    },
    /// A line is no token.
    #[error(
        "line {line} of the token file {}: a line is a token without blanks, optionally after `look ` or `act `",
        file.display()
    )]
    BadLine {
        /// The file.
        file: PathBuf,
        /// The line, from 1.
        line: usize,
    },
    /// It holds none.
    #[error("the token file {} holds no token: write one on a line", file.display())]
    Empty {
        /// The file.
        file: PathBuf,
    },
}

/// The tokens of the token file.
#[derive(Clone)]
pub struct Tokens {
    entries: Vec<(Box<[u8]>, Rights)>,
}

impl std::fmt::Debug for Tokens {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(f, "Tokens({} hidden)", self.entries.len())
    }
}

impl Tokens {
    /// Reads the file.
    ///
    /// # Errors
    /// [`TokenError`] says which line is wrong.
    pub fn read(file: &Path) -> Result<Self, TokenError> {
        let text = std::fs::read_to_string(file).map_err(|e| TokenError::Unreadable {
            file: file.to_owned(),
            why: e.to_string(),
        })?;
        Self::parse(&text, file)
    }

    fn parse(text: &str, file: &Path) -> Result<Self, TokenError> {
        let mut entries = Vec::new();
        for (at, line) in text.lines().enumerate() {
            let words: Vec<&str> = line.split_whitespace().collect();
            let (token, look, act) = match words.as_slice() {
                [] => continue,
                ["look", token] => (token, true, false),
                ["act", token] => (token, false, true),
                [token] => (token, true, true),
                _ => {
                    return Err(TokenError::BadLine {
                        file: file.to_owned(),
                        line: at + 1,
                    });
                }
            };
            entries.push((token.as_bytes().into(), Rights { look, act }));
        }
        if entries.is_empty() {
            return Err(TokenError::Empty {
                file: file.to_owned(),
            });
        }
        Ok(Self { entries })
    }

    /// What this token allows; `None` when it is not in the file.
    pub fn rights(&self, token: &str) -> Option<Rights> {
        let mut found = None;
        for (known, rights) in &self.entries {
            if bool::from(known.ct_eq(token.as_bytes())) {
                found = Some(found.map_or(*rights, |r: Rights| r.and(*rights)));
            }
        }
        found
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn lines_give_rights() {
        let text = "look blue-door\n\nact  green-door\nred-door\r\n";
        let tokens = Tokens::parse(text, Path::new("t")).expect("good");
        for (token, rights) in [
            ("blue-door", Some((true, false))),
            ("green-door", Some((false, true))),
            ("red-door", Some((true, true))),
            ("red-doo", None),
            ("", None),
        ] {
            let got = tokens.rights(token).map(|r| (r.look, r.act));
            assert_eq!(got, rights, "{token:?}");
        }
        assert_eq!(format!("{tokens:?}"), "Tokens(3 hidden)");
    }

    #[test]
    fn faults_name_the_line() {
        let parse = |text| Tokens::parse(text, Path::new("t")).map(|_| ());
        let bad = |line| {
            Err(TokenError::BadLine {
                file: "t".into(),
                line,
            })
        };
        assert_eq!(parse("good\nread me\n"), bad(2));
        assert_eq!(parse("act two words\n"), bad(1));
        assert_eq!(parse("\n \n"), Err(TokenError::Empty { file: "t".into() }));
        let missing = Tokens::read(Path::new("/nowhere/tokens"));
        assert!(matches!(missing, Err(TokenError::Unreadable { .. })));
    }
}
