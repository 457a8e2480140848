//! Reads the registers of SystemVerilog off its text, to count what elaboration finds in another way: the variables that
//! the statements of clocked processes and of `always_latch` assign. It knows nothing of parameters, types or
//! preprocessor conditions; widths, and which processes exist, are read by people and written beside the names.

use std::collections::BTreeSet;

/// The variables, without index and member, that the processes of a text store: in clocked ones those assigned with `<=`.
#[derive(PartialEq, Eq, Default, Debug)]
pub struct Stored {
    pub clocked: BTreeSet<String>,
    pub latched: BTreeSet<String>,
}

pub fn stored(text: &str) -> Stored {
    let tokens = tokens(text);
    let mut stored = Stored::default();
    for (at, token) in tokens.iter().enumerate() {
        let mut reader = Reader { tokens: &tokens, at: at + 1, assigned: BTreeSet::new() };
        match token.as_str() {
            "always_latch" => {
                reader.statement();
                stored.latched.append(&mut reader.assigned.into_iter().map(|(name, _)| name).collect());
            }
            "always_ff" | "always" if reader.clocked() => {
                reader.statement();
                let nonblocking = reader.assigned.into_iter().filter(|(_, operator)| operator == "<=");
                stored.clocked.extend(nonblocking.map(|(name, _)| name));
            }
            _ => {}
        }
    }
    stored
}

/// Words, numbers and symbols; comments and strings left out. Of symbols of several characters only `<=` is kept together.
fn tokens(text: &str) -> Vec<String> {
    let mut tokens = Vec::new();
    let mut rest = text;
    while let Some(first) = rest.chars().next() {
        let length = if rest.starts_with("//") {
            rest.find('\n').unwrap_or(rest.len())
        } else if rest.starts_with("/*") {
            rest.find("*/").map_or(rest.len(), |end| end + 2)
        } else if first == '"' {
            rest[1..].find('"').map_or(rest.len(), |end| end + 2)
        } else if first.is_ascii_alphanumeric() || "_$`".contains(first) {
            let more = rest[1..].find(|next: char| !next.is_ascii_alphanumeric() && !"_$".contains(next));
            let length = more.map_or(rest.len(), |more| more + 1);
            tokens.push(rest[..length].to_string());
            length
        } else if rest.starts_with("<=") {
            tokens.push("<=".to_string());
            2
        } else {
            if !first.is_whitespace() {
                tokens.push(first.to_string());
            }
            first.len_utf8()
        };
        rest = &rest[length..];
    }
    tokens
}

struct Reader<'a> {
    tokens: &'a [String],
    at: usize,
    /// Variables with the operator of their assignment.
    assigned: BTreeSet<(String, String)>,
}

impl Reader<'_> {
    fn peek(&self) -> &str {
        self.tokens.get(self.at).map_or("", String::as_str)
    }

    fn take(&mut self, token: &str) -> bool {
        let found = self.peek() == token;
        self.at += usize::from(found);
        found
    }

    /// Passes a parenthesis, bracket or brace with all it holds.
    fn group(&mut self) {
        let mut depth = 0;
        while self.at < self.tokens.len() {
            match self.peek() {
                "(" | "[" | "{" => depth += 1,
                ")" | "]" | "}" => depth -= 1,
                _ => {}
            }
            self.at += 1;
            if depth == 0 {
                break;
            }
        }
    }

    fn until(&mut self, token: &str) {
        while self.at < self.tokens.len() && self.peek() != token {
            if matches!(self.peek(), "(" | "[" | "{") { self.group() } else { self.at += 1 }
        }
        self.at += 1;
    }

    /// Passes an event control; whether it waits for an edge.
    fn clocked(&mut self) -> bool {
        if !self.take("@") {
            return false;
        }
        let start = self.at;
        self.group();
        self.tokens[start..self.at].iter().any(|token| token == "posedge" || token == "negedge")
    }

    fn statement(&mut self) {
        let word = self.peek().to_string();
        match word.as_str() {
            "begin" => {
                self.at += 1;
                self.label();
                while !self.take("end") {
                    assert!(self.at < self.tokens.len(), "a block does not end");
                    self.statement();
                }
                self.label();
            }
            "if" => {
                self.at += 1;
                self.group();
                self.statement();
                if self.take("else") {
                    self.statement();
                }
            }
            "for" => {
                self.at += 1;
                self.group();
                self.statement();
            }
            "unique" | "unique0" | "priority" => {
                self.at += 1;
                self.statement();
            }
            "case" | "casez" | "casex" => {
                self.at += 1;
                self.group();
                while !self.take("endcase") {
                    assert!(self.at < self.tokens.len(), "a case does not end");
                    self.until(":");
                    self.statement();
                }
            }
            ";" => self.at += 1,
            _ => {
                let name = word;
                self.at += 1;
                loop {
                    match self.peek() {
                        "[" => self.group(),
                        "." => self.at += 2,
                        _ => break,
                    }
                }
                let operator = self.peek().to_string();
                if matches!(operator.as_str(), "<=" | "=") {
                    self.assigned.insert((name, operator));
                }
                self.until(";");
            }
        }
    }

    fn label(&mut self) {
        if self.take(":") {
            self.at += 1;
        }
    }
}

#[test]
fn reads_nested_statements() {
    let text = "always_ff @(posedge c, negedge r) // x <= y;\n\
                if (!r) a <= 0; else begin : l t = a <= b; unique case (s) 2'b01: q[i].f[1:0] <= {a, b}; \
                default: begin w <= 1; end endcase for (int i = 0; i <= 3; i++) v[i] <= i; end : l\n\
                always_latch if (e) begin m = d; n <= d; end\n\
                always @(*) k <= 1; always @(negedge c) z <= 1;";
    let set = |names: &[&str]| names.iter().map(|name| (*name).to_string()).collect();
    assert_eq!(stored(text), Stored { clocked: set(&["a", "q", "v", "w", "z"]), latched: set(&["m", "n"]) });
}
