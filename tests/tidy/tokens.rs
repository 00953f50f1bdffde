//! Just enough of Rust's lexical grammar to look at code without its comments and texts: a word in a
//! comment breaks no rule, and a rule is not fooled by a line break in a path.

/// A word or a sign, and the line on which it stands (from 1).
#[derive(Clone, Debug, PartialEq, Eq)]
pub struct Token {
    /// An identifier, a keyword, a number, `::`, or a single sign.
    pub text: String,
    /// Its line.
    pub line: usize,
}

/// The tokens of a source text. Comments, texts, characters and lifetimes leave none.
pub fn tokens(source: &str) -> Vec<Token> {
    let mut reader = Reader {
        chars: source.chars().collect(),
        at: 0,
        line: 1,
    };
    let mut found = Vec::new();
    while reader.at < reader.chars.len() {
        let line = reader.line;
        if let Some(text) = reader.next() {
            found.push(Token { text, line });
        }
    }
    found
}

struct Reader {
    chars: Vec<char>,
    at: usize,
    line: usize,
}

impl Reader {
    fn peek(&self, ahead: usize) -> char {
        self.chars.get(self.at + ahead).copied().unwrap_or('\0')
    }

    fn skip(&mut self, count: usize) {
        for _ in 0..count {
            if self.peek(0) == '\n' {
                self.line += 1;
            }
            self.at += 1;
        }
    }

    fn more(&self) -> bool {
        self.at < self.chars.len()
    }

    fn next(&mut self) -> Option<String> {
        match (self.peek(0), self.peek(1)) {
            ('/', '/') => {
                while self.more() && self.peek(0) != '\n' {
                    self.skip(1);
                }
                None
            }
            ('/', '*') => {
                self.block_comment();
                None
            }
            ('"', _) => {
                self.text();
                None
            }
            ('\'', _) => {
                self.character_or_lifetime();
                None
            }
            (':', ':') => {
                self.skip(2);
                Some("::".to_owned())
            }
            (c, _) if c.is_alphanumeric() || c == '_' => self.word(),
            (c, _) => {
                self.skip(1);
                (!c.is_whitespace()).then(|| c.to_string())
            }
        }
    }

    fn block_comment(&mut self) {
        let mut depth = 0;
        while self.more() {
            match (self.peek(0), self.peek(1)) {
                ('/', '*') => {
                    depth += 1;
                    self.skip(2);
                }
                ('*', '/') => {
                    depth -= 1;
                    self.skip(2);
                    if depth == 0 {
                        return;
                    }
                }
                _ => self.skip(1),
            }
        }
    }

    fn text(&mut self) {
        self.skip(1);
        while self.more() {
            match self.peek(0) {
                '\\' => self.skip(2),
                '"' => {
                    self.skip(1);
                    return;
                }
                _ => self.skip(1),
            }
        }
    }

    /// `r"…"`, `r#"…"#` and so on; the prefix has been read.
    fn raw_text(&mut self) {
        let mut hashes = 0;
        while self.peek(0) == '#' {
            hashes += 1;
            self.skip(1);
        }
        self.skip(1);
        while self.more() {
            let closes = self.peek(0) == '"' && (1..=hashes).all(|i| self.peek(i) == '#');
            if closes {
                self.skip(1 + hashes);
                return;
            }
            self.skip(1);
        }
    }

    fn character_or_lifetime(&mut self) {
        match (self.peek(1), self.peek(2)) {
            ('\\', _) => {
                self.skip(3);
                while self.more() && self.peek(0) != '\'' {
                    self.skip(1);
                }
                self.skip(1);
            }
            (_, '\'') => self.skip(3),
            _ => {
                self.skip(1);
                while self.peek(0).is_alphanumeric() || self.peek(0) == '_' {
                    self.skip(1);
                }
            }
        }
    }

    fn word(&mut self) -> Option<String> {
        let from = self.at;
        while self.peek(0).is_alphanumeric() || self.peek(0) == '_' {
            self.skip(1);
        }
        let word: String = self.chars[from..self.at].iter().collect();
        let raw = matches!(word.as_str(), "r" | "br" | "cr");
        if raw
            && (self.peek(0) == '"' || (self.peek(0) == '#' && matches!(self.peek(1), '"' | '#')))
        {
            self.raw_text();
            return None;
        }
        if matches!(word.as_str(), "b" | "c") && self.peek(0) == '"' {
            self.text();
            return None;
        }
        if word == "b" && self.peek(0) == '\'' {
            self.character_or_lifetime();
            return None;
        }
        Some(word)
    }
}
