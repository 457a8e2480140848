//! Forms of Verilog that are legal or common and that the parser refuses, put into forms of equal meaning that it reads:
//!
//! - `begin : x ... end` as an item of a module or generate region (IEEE 1364-2001, A.4.2) becomes `if (1) begin : x`;
//!   without a name it makes no scope of its own, so that `begin` and `end` are left out;
//! - the initial value in a port declaration of a body (`output reg q = 0;`) becomes an `initial` statement behind it;
//! - `$fatal("text")` gets the finish number that its text stands in for.
//!
//! Only pieces that do not parse as they stand are treated, so nothing that is understood already can change. The
//! walk follows items and statements by their keywords; what it does not know it passes over to the next semicolon.
//!
//! Invariant: the result is the original bytes, some left out and some in another order, with a few words between them, so
//! every byte keeps its place.

use std::ops::Range;

use super::macros::identifier;
use super::regions::string_end;

/// A part of the new text.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Piece {
    /// These bytes of the old text.
    Kept(Range<usize>),
    /// Words of ours, which stand for the place of the old byte at this offset.
    Word(&'static str, usize),
}

/// The pieces of the new text; `None` when there is nothing to change.
pub fn reshape(text: &str) -> Option<Vec<Piece>> {
    let mut walk = Walk { text, tokens: tokens(text), at: 0, edits: Vec::new() };
    walk.items(&[]);
    walk.finish_numbers();
    let mut edits = walk.edits;
    if edits.is_empty() {
        return None;
    }
    edits.sort_by_key(|edit| edit.out.start);
    let mut pieces = Vec::new();
    let mut done = 0;
    for edit in edits {
        if edit.out.start > done {
            pieces.push(Piece::Kept(done..edit.out.start));
        }
        pieces.extend(edit.new);
        done = done.max(edit.out.end);
    }
    pieces.push(Piece::Kept(done..text.len()));
    Some(pieces)
}

/// Bytes that are left out, and what stands there instead.
struct Edit {
    out: Range<usize>,
    new: Vec<Piece>,
}

fn tokens(text: &str) -> Vec<Range<usize>> {
    let bytes = text.as_bytes();
    let mut tokens = Vec::new();
    let mut at = 0;
    while let Some(&byte) = bytes.get(at) {
        let end = match byte {
            byte if byte.is_ascii_whitespace() => {
                at += 1;
                continue;
            }
            b'"' => string_end(bytes, at),
            b'`' => identifier(text, at + 1).map_or(at + 1, |(_, end)| end),
            byte if byte.is_ascii_alphanumeric() || matches!(byte, b'_' | b'$' | b'\\' | b'\'') => {
                match identifier(text, at) {
                    Some((_, end)) => end,
                    None => at + 1 + bytes[at + 1..].iter().take_while(|byte| is_word(**byte)).count(),
                }
            }
            _ => at + text[at..].chars().next().map_or(1, char::len_utf8),
        };
        tokens.push(at..end);
        at = end;
    }
    tokens
}

fn is_word(byte: u8) -> bool {
    byte.is_ascii_alphanumeric() || matches!(byte, b'_' | b'$')
}

struct Walk<'t> {
    text: &'t str,
    tokens: Vec<Range<usize>>,
    at: usize,
    edits: Vec<Edit>,
}

/// Declarations that hold no items of the design, with the word that ends them.
const CLOSED: &[(&str, &str)] = &[
    ("function", "endfunction"),
    ("task", "endtask"),
    ("class", "endclass"),
    ("covergroup", "endgroup"),
    ("property", "endproperty"),
    ("sequence", "endsequence"),
    ("specify", "endspecify"),
    ("checker", "endchecker"),
    ("table", "endtable"),
    ("config", "endconfig"),
    ("program", "endprogram"),
];

impl<'t> Walk<'t> {
    fn word(&self, at: usize) -> &'t str {
        self.tokens.get(at).map_or("", |token| &self.text[token.clone()])
    }

    fn now(&self) -> &'t str {
        self.word(self.at)
    }

    fn ended(&self) -> bool {
        self.at >= self.tokens.len()
    }

    fn take(&mut self, word: &str) -> bool {
        let found = !self.ended() && self.now() == word;
        self.at += usize::from(found);
        found
    }

    /// Items up to one of the closing words, which is left for the caller.
    fn items(&mut self, closing: &[&str]) {
        while !self.ended() && !closing.contains(&self.now()) {
            let before = self.at;
            self.item();
            self.at = self.at.max(before + 1);
        }
    }

    fn item(&mut self) {
        match self.now() {
            "begin" => self.bare_block(),
            "generate" => {
                self.at += 1;
                self.items(&["endgenerate", "endmodule", "endinterface"]);
                self.take("endgenerate");
            }
            "if" => {
                self.at += 1;
                self.brackets();
                self.branch();
                if self.take("else") {
                    self.branch();
                }
            }
            "for" => {
                self.at += 1;
                self.brackets();
                self.branch();
            }
            "case" => self.generate_case(),
            "always" | "always_comb" | "always_ff" | "always_latch" | "initial" | "final" => {
                self.at += 1;
                self.statement();
            }
            "assert" | "assume" | "cover" | "restrict" => self.assertion(),
            "input" | "output" | "inout" => self.port_declaration(),
            "module" | "macromodule" | "interface" | "package" => {
                self.skip_through_semicolon();
                self.items(&["endmodule", "endinterface", "endpackage"]);
                self.at += 1;
                self.label();
            }
            "(" if self.word(self.at + 1) == "*" => self.brackets(),
            word => match CLOSED.iter().find(|(open, _)| *open == word) {
                Some((_, close)) => {
                    while !self.ended() && !self.take(close) {
                        self.at += 1;
                    }
                    self.label();
                }
                None if self.word(self.at + 1) == ":" && word.starts_with(|c: char| c.is_alphabetic() || c == '_') => {
                    self.at += 2;
                    self.item();
                }
                None if matches!(word, "endclocking" | "endgenerate" | "end" | "endprimitive") => {
                    self.at += 1;
                    self.label();
                }
                None => self.skip_through_semicolon(),
            },
        }
    }

    /// `: name` behind a `begin` or an end.
    fn label(&mut self) -> bool {
        let found = self.take(":");
        self.at += usize::from(found && !self.ended());
        found
    }

    fn bare_block(&mut self) {
        let begin = self.tokens[self.at].clone();
        self.at += 1;
        if self.label() {
            let word = Piece::Word("if (1) ", begin.start);
            self.edits.push(Edit { out: begin.start..begin.start, new: vec![word] });
            self.block_rest();
            return;
        }
        self.items(&["end", "endmodule"]);
        if self.now() == "end" {
            let end = self.tokens[self.at].clone();
            self.at += 1;
            self.edits.push(Edit { out: begin, new: Vec::new() });
            self.edits.push(Edit { out: end, new: Vec::new() });
        }
    }

    /// What follows the head of a generate block, through its `end`.
    fn block_rest(&mut self) {
        self.items(&["end", "endmodule"]);
        self.take("end");
        self.label();
    }

    /// The item or block that a generate condition or loop governs.
    fn branch(&mut self) {
        if self.word(self.at + 1) == ":" && self.word(self.at + 2) == "begin" {
            self.at += 2;
        }
        if self.take("begin") {
            self.label();
            self.block_rest();
        } else {
            self.item();
        }
    }

    fn generate_case(&mut self) {
        self.at += 1;
        self.brackets();
        while !self.ended() && !self.take("endcase") {
            let before = self.at;
            if self.take("default") {
                self.take(":");
            } else {
                while !self.ended() && !self.take(":") {
                    self.skip_one();
                }
            }
            self.branch();
            self.at = self.at.max(before + 1);
        }
    }

    /// One token, or everything in a pair of brackets.
    fn skip_one(&mut self) {
        if matches!(self.now(), "(" | "[" | "{") { self.brackets() } else { self.at += 1 }
    }

    /// A pair of brackets with all that is in it.
    fn brackets(&mut self) {
        let mut depth = 0usize;
        while !self.ended() {
            match self.now() {
                "(" | "[" | "{" => depth += 1,
                ")" | "]" | "}" => depth = depth.saturating_sub(1),
                _ => {}
            }
            self.at += 1;
            if depth == 0 {
                return;
            }
        }
    }

    fn skip_through_semicolon(&mut self) {
        while !self.ended() && !self.take(";") {
            if matches!(self.now(), "endmodule" | "endgenerate" | "endinterface" | "endpackage") {
                return;
            }
            self.skip_one();
        }
    }

    fn statement(&mut self) {
        match self.now() {
            "begin" | "fork" | "case" | "casez" | "casex" | "randcase" => self.procedural_block(),
            "unique" | "unique0" | "priority" | "forever" => {
                self.at += 1;
                self.statement();
            }
            "if" => {
                self.at += 1;
                self.brackets();
                self.statement();
                if self.take("else") {
                    self.statement();
                }
            }
            "for" | "while" | "repeat" | "foreach" => {
                self.at += 1;
                self.brackets();
                self.statement();
            }
            "do" => {
                self.at += 1;
                self.statement();
                self.skip_through_semicolon();
            }
            "@" | "#" => {
                while matches!(self.now(), "@" | "#") {
                    self.at += 1;
                }
                self.skip_one();
                while self.take(".") {
                    self.at += 1;
                }
                self.statement();
            }
            "(" if self.word(self.at + 1) == "*" => {
                self.brackets();
                self.statement();
            }
            "assert" | "assume" | "cover" | "restrict" => self.assertion(),
            "end" | "endmodule" => {}
            _ if self.word(self.at + 1) == ":" => {
                self.at += 2;
                self.statement();
            }
            _ => self.skip_through_semicolon(),
        }
    }

    /// `begin`, `fork` or `case` through its end.
    fn procedural_block(&mut self) {
        let mut depth = 0usize;
        while !self.ended() {
            match self.now() {
                "begin" | "case" | "casez" | "casex" | "randcase" => depth += 1,
                "fork" if !matches!(self.word(self.at.wrapping_sub(1)), "disable" | "wait") => depth += 1,
                "end" | "endcase" | "join" | "join_any" | "join_none" => depth = depth.saturating_sub(1),
                "endmodule" => return,
                _ => {}
            }
            self.at += 1;
            if depth == 0 {
                break;
            }
        }
        self.label();
    }

    /// An assertion with its action block.
    fn assertion(&mut self) {
        while !self.ended() && !matches!(self.now(), "(" | ";") {
            self.at += 1;
        }
        if self.now() == "(" {
            self.brackets();
        }
        if self.now() != "else" {
            self.statement();
        }
        if self.take("else") {
            self.statement();
        }
    }

    /// A port declaration of a body: each initial value moves behind the declaration. Only a variable has one: what
    /// stands behind a net is a driver, which no standard allows there.
    fn port_declaration(&mut self) {
        if !self.declares_variables() {
            return self.skip_through_semicolon();
        }
        let mut moved = Vec::new();
        while !self.ended() && !matches!(self.now(), ";" | "endmodule") {
            if self.now() != "=" {
                self.skip_one();
                continue;
            }
            let name = self.tokens[self.at - 1].clone();
            let equals = self.tokens[self.at].clone();
            while !self.ended() && !matches!(self.now(), "," | ";") {
                self.skip_one();
            }
            let end = self.tokens[self.at - 1].end;
            self.edits.push(Edit { out: equals.start..end, new: Vec::new() });
            moved.extend([
                Piece::Word(" initial ", name.start),
                Piece::Kept(name),
                Piece::Kept(equals.start..end),
                Piece::Word(";", equals.start),
            ]);
        }
        if self.now() == ";" && !moved.is_empty() {
            let end = self.tokens[self.at].end;
            self.edits.push(Edit { out: end..end, new: moved });
        }
        self.take(";");
    }

    /// Whether the direction at this place is followed by a type of variables.
    fn declares_variables(&self) -> bool {
        const NETS: &[&str] =
            &["wire", "tri", "tri0", "tri1", "wand", "wor", "triand", "trior", "trireg", "uwire", "supply0", "supply1"];
        let first = self.word(self.at + 1);
        let behind = self.word(self.at + 2);
        let is_type = behind.starts_with(|c: char| c.is_alphabetic() || matches!(c, '_' | '\\' | '[' | ':'));
        is_type && !NETS.contains(&first) && !matches!(first, "signed" | "unsigned" | "[")
    }

    fn finish_numbers(&mut self) {
        for at in 0..self.tokens.len() {
            if self.word(at) == "$fatal" && self.word(at + 1) == "(" && self.word(at + 2).starts_with('"') {
                let start = self.tokens[at + 2].start;
                self.edits.push(Edit { out: start..start, new: vec![Piece::Word("1, ", start)] });
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn reshaped(text: &str) -> String {
        let pieces = reshape(text).unwrap_or_else(|| vec![Piece::Kept(0..text.len())]);
        let part = |piece: Piece| match piece {
            Piece::Kept(range) => text[range].to_string(),
            Piece::Word(word, _) => word.to_string(),
        };
        pieces.into_iter().map(part).collect()
    }

    #[track_caller]
    fn check(text: &str, expected: &str) {
        let words = |text: &str| text.split_whitespace().map(str::to_string).collect::<Vec<_>>().join(" ");
        assert_eq!(words(&reshaped(text)), words(expected));
    }

    #[test]
    fn blocks_among_items() {
        check("module m; begin : x wire w; end endmodule", "module m; if (1) begin : x wire w; end endmodule");
        check(
            "module m; generate begin wire w; if (A) begin : y begin : z end : z end end endgenerate endmodule",
            "module m; generate wire w; if (A) begin : y if (1) begin : z end : z end endgenerate endmodule",
        );
        check(
            "module m; case (P) 0, 1: begin assign a = b ? c : d; end default: ; endcase begin assign e = f; end endmodule",
            "module m; case (P) 0, 1: begin assign a = b ? c : d; end default: ; endcase assign e = f; endmodule",
        );
    }

    #[test]
    fn statements_are_left_alone() {
        for text in [
            "module m; always @(posedge c or negedge r) if (!r) begin q <= 0; end else begin : x q <= d; end endmodule",
            "module m; initial begin fork begin end join wait fork; end always @* case (a) 0: begin end endcase endmodule",
            "module m; always @* begin if (a) begin end else if (b) begin end end function f; begin end endfunction \
             endmodule",
            "module m; a1: assert property (x) begin end else begin end always #5 begin end always @e.f begin end endmodule",
            "module m; for (genvar i = 0; i < 4; i++) begin : g if (i) begin end else begin end end task t; begin end \
             endtask endmodule",
        ] {
            assert_eq!(reshape(text), None, "{text}");
        }
    }

    #[test]
    fn initial_values_of_ports() {
        check(
            "module m(q, r, s); output reg [3:0] q = {2'b1, 2'b0}, r, s = 1; input c; endmodule",
            "module m(q, r, s); output reg [3:0] q , r, s ; initial q= {2'b1, 2'b0}; initial s= 1; input c; endmodule",
        );
    }

    #[test]
    fn finish_numbers() {
        check("if (A) $fatal(\"no\"); $fatal(1, \"x\");", "if (A) $fatal(1, \"no\"); $fatal(1, \"x\");");
    }

    #[test]
    fn torn_texts_end() {
        let text = "module m; generate begin : x case (P) default begin output reg q = a always if (";
        for end in 0..text.len() {
            reshape(&text[..end]);
        }
    }
}
