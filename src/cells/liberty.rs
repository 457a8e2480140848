//! The syntax of Liberty, an open format for cell libraries: groups `name (arguments) { ... }`, attributes `name : value ;`
//! and `name (values) ;`, comments, and lines continued by a backslash. Libraries are large and hold mostly tables of delays;
//! groups that say nothing about logic are passed over without building anything.
//!
//! It is our own because no sound crate was found on 2026-12-01: `liberty-io` and `libertyparse` have the AGPL,
//! `liberty-parser` gives no places and refuses attributes without a semicolon (which real libraries have), and
//! `liberty-db` types all of the format and is a hundred times our need.

use std::path::Path;

use crate::source::PathError;

/// A group with what it holds.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Group {
    pub name: String,
    pub arguments: Vec<String>,
    /// 1-based.
    pub line: usize,
    pub attributes: Vec<Attribute>,
    pub groups: Vec<Group>,
}

/// `name : value ;` or `name (value, value) ;`.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(super) struct Attribute {
    pub name: String,
    pub values: Vec<String>,
    pub line: usize,
}

impl Group {
    /// The value of a simple attribute.
    pub fn value(&self, name: &str) -> Option<&str> {
        self.attribute(name)?.values.first().map(String::as_str)
    }

    pub fn attribute(&self, name: &str) -> Option<&Attribute> {
        self.attributes.iter().find(|attribute| attribute.name == name)
    }

    /// Whether a simple attribute says `true`.
    pub fn says(&self, name: &str) -> bool {
        self.value(name).is_some_and(|value| value.eq_ignore_ascii_case("true"))
    }

    pub fn groups<'a>(&'a self, name: &'a str) -> impl Iterator<Item = &'a Group> {
        self.groups.iter().filter(move |group| group.name == name)
    }
}

/// Groups that are read; others, with all inside them, are passed over.
const READ: [&str; 11] =
    ["library", "cell", "pin", "ff", "latch", "statetable", "ff_bank", "latch_bank", "bus", "bundle", "pg_pin"];

/// Groups may be nested this deep.
const DEPTH: usize = 64;

/// Reads a library.
///
/// # Errors
/// The first place at which the text is no Liberty.
pub(super) fn parse(text: &str, path: &Path) -> Result<Group, PathError> {
    let mut parser = Parser { text, at: 0, line: 1, path };
    let mut library = None;
    loop {
        match parser.next()? {
            Token::End => break,
            Token::Symbol(b';') => {}
            Token::Word(name) => match parser.statement(name, 0, true)? {
                Some(Statement::Group(group)) if group.name == "library" && library.is_none() => library = Some(group),
                _ => return Err(parser.error("there is something else than one `library (...) { ... }`")),
            },
            token => return Err(parser.unexpected(&token, "`library (...) {`")),
        }
    }
    library.ok_or_else(|| parser.error("there is no `library (...) { ... }` in it"))
}

#[derive(Clone, PartialEq, Eq, Debug)]
enum Token<'a> {
    Word(&'a str),
    /// A quoted text, continued lines included.
    Text(&'a str),
    Symbol(u8),
    End,
}

enum Statement {
    Group(Group),
    Attribute(Attribute),
}

struct Parser<'a> {
    text: &'a str,
    at: usize,
    line: usize,
    path: &'a Path,
}

impl<'a> Parser<'a> {
    fn error(&self, message: &str) -> PathError {
        let place = format!("{}:{}", self.path.display(), self.line);
        PathError::new(format!("{place}: {message}"), "the file must be a Liberty library; check that it is whole")
    }

    fn unexpected(&self, token: &Token<'_>, wanted: &str) -> PathError {
        let found = match token {
            Token::Word(word) => format!("`{word}`"),
            Token::Text(text) => format!("\"{}\"", text.chars().take(40).collect::<String>()),
            Token::Symbol(symbol) => format!("`{}`", char::from(*symbol)),
            Token::End => "the end of the file".to_string(),
        };
        self.error(&format!("{found} where {wanted} is expected"))
    }

    fn skip_blanks(&mut self) -> Result<(), PathError> {
        let bytes = self.text.as_bytes();
        while let Some(&byte) = bytes.get(self.at) {
            match byte {
                b'\n' => {
                    self.line += 1;
                    self.at += 1;
                }
                // A backslash continues a line, which here is a blank like others.
                b'\\' => self.at += 1,
                byte if byte.is_ascii_whitespace() => self.at += 1,
                b'/' if bytes.get(self.at + 1) == Some(&b'*') => {
                    let Some(length) = self.text.get(self.at + 2..).and_then(|rest| rest.find("*/")) else {
                        return Err(self.error("a comment begins here and does not end"));
                    };
                    let end = self.at + length + 4;
                    self.line += count_lines(&bytes[self.at..end]);
                    self.at = end;
                }
                b'/' if bytes.get(self.at + 1) == Some(&b'/') => {
                    while bytes.get(self.at).is_some_and(|&byte| byte != b'\n') {
                        self.at += 1;
                    }
                }
                _ => break,
            }
        }
        Ok(())
    }

    fn next(&mut self) -> Result<Token<'a>, PathError> {
        self.skip_blanks()?;
        let bytes = self.text.as_bytes();
        let Some(&byte) = bytes.get(self.at) else { return Ok(Token::End) };
        match byte {
            b'{' | b'}' | b'(' | b')' | b':' | b';' | b',' => {
                self.at += 1;
                Ok(Token::Symbol(byte))
            }
            b'"' => {
                let start = self.at + 1;
                let mut end = start;
                while let Some(&byte) = bytes.get(end) {
                    match byte {
                        b'"' => break,
                        b'\\' => end += 2,
                        _ => end += 1,
                    }
                }
                if end >= bytes.len() {
                    return Err(self.error("a text in quotes begins here and does not end"));
                }
                self.line += count_lines(&bytes[start..end]);
                self.at = end + 1;
                Ok(Token::Text(self.text.get(start..end).unwrap_or("")))
            }
            _ => {
                let start = self.at;
                let ends = |byte: u8| byte.is_ascii_whitespace() || b"{}():;,\"\\".contains(&byte);
                while bytes.get(self.at).is_some_and(|&byte| !ends(byte)) {
                    self.at += 1;
                }
                Ok(Token::Word(self.text.get(start..self.at).unwrap_or("")))
            }
        }
    }

    /// The next token without taking it.
    fn peek(&mut self) -> Result<Token<'a>, PathError> {
        let (at, line) = (self.at, self.line);
        let token = self.next()?;
        (self.at, self.line) = (at, line);
        Ok(token)
    }

    /// What follows the word `name`; `None` for a group that is passed over.
    fn statement(&mut self, name: &str, depth: usize, keep: bool) -> Result<Option<Statement>, PathError> {
        let line = self.line;
        match self.next()? {
            Token::Symbol(b':') => {
                let value = self.simple_value(line)?;
                Ok(Some(Statement::Attribute(Attribute { name: name.to_string(), values: vec![value], line })))
            }
            Token::Symbol(b'(') => {
                let values = self.arguments()?;
                match self.peek()? {
                    Token::Symbol(b'{') => {
                        self.next()?;
                        if !keep || !READ.contains(&name) {
                            self.pass_over(line, name)?;
                            return Ok(None);
                        }
                        if depth > DEPTH {
                            return Err(self.error(&format!("groups are nested more than {DEPTH} deep")));
                        }
                        let mut group = Group {
                            name: name.to_string(),
                            arguments: values,
                            line,
                            attributes: Vec::new(),
                            groups: Vec::new(),
                        };
                        self.body(&mut group, depth + 1)?;
                        Ok(Some(Statement::Group(group)))
                    }
                    _ => Ok(Some(Statement::Attribute(Attribute { name: name.to_string(), values, line }))),
                }
            }
            token => Err(self.unexpected(&token, &format!("`:` or `(` after `{name}`"))),
        }
    }

    fn body(&mut self, group: &mut Group, depth: usize) -> Result<(), PathError> {
        loop {
            match self.next()? {
                Token::Symbol(b'}') => return Ok(()),
                Token::Symbol(b';') => {}
                Token::Word(name) => match self.statement(name, depth, true)? {
                    Some(Statement::Group(inner)) => group.groups.push(inner),
                    Some(Statement::Attribute(attribute)) => group.attributes.push(attribute),
                    None => {}
                },
                Token::End => {
                    let message = format!("the group `{}` of line {} is not closed", group.name, group.line);
                    return Err(self.error(&message));
                }
                token => return Err(self.unexpected(&token, "an attribute, a group or `}`")),
            }
        }
    }

    /// Everything up to the closing brace of a group whose opening one was taken.
    fn pass_over(&mut self, line: usize, name: &str) -> Result<(), PathError> {
        let mut open = 1;
        while open > 0 {
            match self.next()? {
                Token::Symbol(b'{') => open += 1,
                Token::Symbol(b'}') => open -= 1,
                Token::End => return Err(self.error(&format!("the group `{name}` of line {line} is not closed"))),
                _ => {}
            }
        }
        Ok(())
    }

    /// The value of a simple attribute: one text, or words up to the semicolon or the end of the line.
    fn simple_value(&mut self, line: usize) -> Result<String, PathError> {
        let mut value = match self.next()? {
            Token::Text(text) => return Ok(unfolded(text)),
            Token::Word(word) => word.to_string(),
            token => return Err(self.unexpected(&token, "the value of an attribute")),
        };
        // An expression such as `VDD + 0.5` has several words.
        loop {
            let before = self.line;
            match self.peek()? {
                Token::Word(word) if before == line && self.same_line(before) => {
                    self.next()?;
                    value.push(' ');
                    value.push_str(word);
                }
                _ => return Ok(value),
            }
        }
    }

    /// Whether the next token stands on this line.
    fn same_line(&self, line: usize) -> bool {
        let mut ahead = Parser { text: self.text, at: self.at, line: self.line, path: self.path };
        ahead.skip_blanks().is_ok() && ahead.line == line
    }

    fn arguments(&mut self) -> Result<Vec<String>, PathError> {
        let mut values: Vec<String> = Vec::new();
        let mut fresh = true;
        loop {
            match self.next()? {
                Token::Symbol(b')') => return Ok(values),
                Token::Symbol(b',') => fresh = true,
                Token::Text(text) => {
                    values.push(unfolded(text));
                    fresh = true;
                }
                Token::Word(word) if fresh || values.is_empty() => {
                    values.push(word.to_string());
                    fresh = false;
                }
                Token::Word(word) => {
                    if let Some(last) = values.last_mut() {
                        last.push(' ');
                        last.push_str(word);
                    }
                }
                Token::Symbol(b':') => {}
                token => return Err(self.unexpected(&token, "`,` or `)`")),
            }
        }
    }
}

fn count_lines(bytes: &[u8]) -> usize {
    bytes.iter().filter(|&&byte| byte == b'\n').count()
}

/// A text without its continued lines.
fn unfolded(text: &str) -> String {
    text.replace("\\\r\n", " ").replace("\\\n", " ").trim().to_string()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn read(text: &str) -> Result<Group, String> {
        parse(text, Path::new("x.lib")).map_err(|error| error.message)
    }

    #[test]
    fn groups_and_attributes_of_every_shape() {
        let text = "/* a\n comment */ library (\"demo\") {\n  time_unit : \"1ns\"\n  voltage : VDD + 0.5 ;\n\
                    \tcapacitive_load_unit (1, pf);\n  lu_table_template (x) { index_1 (\"1, 2\"); }\n\
                    cell (INV) { pin (A, B) { direction : input ; } // a remark\n\
                    pin(Y) { function : \"A \\\n + B\"; timing () { values (\"}{\"); } } };\n}\n";
        let library = read(text).expect("a good library");
        assert_eq!((library.arguments.as_slice(), library.line), (["demo".to_string()].as_slice(), 2));
        assert_eq!((library.value("time_unit"), library.value("voltage")), (Some("1ns"), Some("VDD + 0.5")));
        let unit = library.attribute("capacitive_load_unit").expect("there");
        assert_eq!((unit.values.as_slice(), unit.line), (["1".to_string(), "pf".to_string()].as_slice(), 5));
        let cell = &library.groups[0];
        assert_eq!((library.groups.len(), cell.line, cell.groups.len()), (1, 7, 2));
        assert_eq!((cell.groups[0].arguments.len(), cell.groups[1].value("function")), (2, Some("A   + B")));
    }

    #[test]
    fn broken_texts_name_the_place() {
        let error = |text: &str| read(text).expect_err("broken");
        assert_eq!(error("library (x) {\n cell (A) {\n"), "x.lib:3: the group `cell` of line 2 is not closed");
        assert_eq!(error("library (x) {\n a : \"b\n}"), "x.lib:2: a text in quotes begins here and does not end");
        assert_eq!(error("library (x) {\n a b;\n}"), "x.lib:2: `b` where `:` or `(` after `a` is expected");
        assert_eq!(error("library (x) { /* \n }"), "x.lib:1: a comment begins here and does not end");
        assert_eq!(error("library (x) { } }"), "x.lib:1: `}` where `library (...) {` is expected");
        assert_eq!(error("\n"), "x.lib:2: there is no `library (...) { ... }` in it");
        assert!(error("module m; endmodule").contains("`m` where `:` or `(` after `module` is expected"));
        assert!(error("library (x) { timing () { a : 1; ").contains("the group `timing` of line 1 is not closed"));
    }
}
