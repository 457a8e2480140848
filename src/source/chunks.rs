//! Cuts a preprocessed text into the pieces that are parsed on their own: each ends behind the end of an outermost module,
//! package, interface, program or primitive. Pieces are parsed in parallel, a syntax error loses one piece and not the
//! file, and the parser's memory is that of the largest piece.
//!
//! The same scan guards the parser. Its time grows with the cube of nested parentheses and its memory with the square of
//! an operator chain (measured: 250 parentheses 2 s, 1,000 operators 1.3 s and 670 MB), and every later stage recurses
//! over the same nesting. So each piece is refused, with a place, whose nesting is deeper than what was measured to fit.
//!
//! Invariant: pieces cover the text in order, and what a piece needs from the pieces before it (the default net type,
//! the keyword set) is in its prefix.

use super::macros::identifier;
use super::regions::string_end;

/// The cost that nesting may add up to at any place, in units of which an operator costs ten.
const MAX_COST: u32 = 10_000;
/// Bytes of one piece: the parser takes about 400 bytes of memory for each.
const MAX_PIECE: usize = 4 << 20;

/// Modules within modules: the parser takes time with the square of their depth (measured: 400 deep 0.5 s, 4,000 54 s).
const MAX_OPEN: u32 = 500;

/// What one nesting level costs the parser, measured against an operator's ten.
const PARENTHESIS: u32 = 50;
const BRACKET: u32 = 40;
const BRACE: u32 = 20;
const BLOCK: u32 = 30;
const OPERATOR: u32 = 10;
const PREFIX: u32 = 10;
/// The parser reads a ladder of `else if` in a loop, but the tree is nested.
const ELSE: u32 = 1;

/// A piece of a preprocessed text.
#[derive(Clone, PartialEq, Eq, Debug)]
pub struct Chunk {
    pub start: usize,
    pub end: usize,
    /// Directives of earlier pieces that are still in force.
    pub prefix: String,
    pub refused: Option<Refusal>,
}

/// Why a piece is not parsed, with the offset in the whole text.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub enum Refusal {
    TooDeep(usize),
    TooLong(usize),
}

/// Cuts `text`. Pieces of white space alone are left out.
pub fn chunks(text: &str) -> Vec<Chunk> {
    let mut scan = Scan::default();
    let bytes = text.as_bytes();
    let mut at = 0;
    while let Some(&byte) = bytes.get(at) {
        match byte {
            b' ' | b'\t' | b'\n' | b'\r' | b'\x0c' => {
                at += 1;
                continue;
            }
            b'"' => {
                scan.token();
                at = string_end(bytes, at);
            }
            b'`' => at = scan.directive(text, at),
            b'a'..=b'z' | b'A'..=b'Z' | b'_' | b'\\' => {
                let (word, end) = identifier(text, at).unwrap_or((&text[at..at + 1], at + 1));
                scan.word(if byte == b'\\' { "" } else { word }, at);
                at = end;
                if scan.closed_outermost {
                    at = scan.cut(text, at);
                }
            }
            b'0'..=b'9' | b'$' => {
                scan.token();
                at += 1 + bytes[at + 1..].iter().take_while(|byte| is_word(**byte)).count();
            }
            b'\'' => {
                scan.token();
                at = based_number_end(bytes, at);
            }
            _ => at = scan.symbol(bytes, at),
        }
    }
    scan.finish(text);
    scan.chunks
}

fn is_word(byte: u8) -> bool {
    byte.is_ascii_alphanumeric() || matches!(byte, b'_' | b'$')
}

/// The end of `'h 12?z`, or the offset behind a lone apostrophe.
fn based_number_end(bytes: &[u8], at: usize) -> usize {
    let mut end = at + 1;
    end += usize::from(matches!(bytes.get(end), Some(b's' | b'S')));
    if !matches!(bytes.get(end), Some(b'b' | b'B' | b'o' | b'O' | b'd' | b'D' | b'h' | b'H')) {
        return at + 1;
    }
    end += 1;
    end += bytes[end..].iter().take_while(|byte| matches!(byte, b' ' | b'\t')).count();
    end + bytes[end..].iter().take_while(|&&byte| byte.is_ascii_alphanumeric() || matches!(byte, b'_' | b'?')).count()
}

#[derive(Default)]
struct Scan {
    chunks: Vec<Chunk>,
    start: usize,
    has_tokens: bool,
    refused: Option<Refusal>,
    prefix: String,
    default_nettype: String,
    keywords: Vec<String>,
    /// Open modules and the like.
    open: u32,
    closed_outermost: bool,
    frames: Vec<Frame>,
    /// Sum over all frames.
    cost: u32,
    /// The statement before the next token is complete, unless that is an `else`.
    complete: bool,
    /// The token before was a word such as `extern` or `virtual`, behind which a keyword opens nothing.
    opens_nothing: bool,
    /// The token before was an `else`.
    after_else: bool,
}

/// One open bracket or block.
#[derive(Default)]
struct Frame {
    level: u32,
    /// Operators since the last comma or semicolon.
    operators: u32,
    /// Heads of statements (`if (...)`, `else`) whose last statement is not complete.
    heads: u32,
}

impl Scan {
    /// Any token: settles whether the statement before it is over.
    fn token(&mut self) {
        self.has_tokens = true;
        if self.complete {
            self.complete = false;
            let heads = self.frame().map(|frame| std::mem::take(&mut frame.heads));
            self.cost -= heads.unwrap_or(0);
        }
        self.opens_nothing = false;
        self.after_else = false;
    }

    fn frame(&mut self) -> Option<&mut Frame> {
        if self.frames.is_empty() {
            self.frames.push(Frame::default());
        }
        self.frames.last_mut()
    }

    fn end_operators(&mut self) {
        let operators = self.frame().map(|frame| std::mem::take(&mut frame.operators));
        self.cost -= operators.unwrap_or(0);
    }

    fn add_operator(&mut self, at: usize) {
        if let Some(frame) = self.frame() {
            frame.operators += OPERATOR;
        }
        self.cost += OPERATOR;
        self.check(at);
    }

    fn add_head(&mut self, cost: u32, at: usize) {
        if let Some(frame) = self.frame() {
            frame.heads += cost;
        }
        self.cost += cost;
        self.check(at);
    }

    fn check(&mut self, at: usize) {
        if self.cost > MAX_COST && self.refused.is_none() {
            self.refused = Some(Refusal::TooDeep(at));
        }
    }

    fn open(&mut self, level: u32, at: usize) {
        // There is always a frame for the text around the outermost bracket.
        self.frame();
        self.frames.push(Frame { level, ..Frame::default() });
        self.cost += level;
        self.check(at);
    }

    fn close(&mut self) {
        if self.frames.len() > 1
            && let Some(frame) = self.frames.pop()
        {
            self.cost -= frame.level + frame.operators + frame.heads;
        }
    }

    /// The end of a statement; an `else` may still continue it.
    fn complete(&mut self) {
        self.end_operators();
        self.complete = true;
    }

    fn word(&mut self, word: &str, at: usize) {
        if word == "else" {
            self.complete = false;
            self.has_tokens = true;
            self.add_head(ELSE, at);
            self.after_else = true;
            return;
        }
        let opens_nothing = self.opens_nothing;
        let after_else = self.after_else;
        self.token();
        match word {
            "begin" | "case" | "casez" | "casex" => self.open(BLOCK, at),
            "fork" if !opens_nothing => self.open(BLOCK, at),
            "end" | "endcase" | "join" | "join_any" | "join_none" => {
                self.close();
                self.complete();
            }
            "if" if after_else => {}
            "if" | "for" | "while" | "repeat" | "forever" | "foreach" | "do" => self.add_head(PREFIX, at),
            "extern" | "virtual" | "disable" | "wait" => self.opens_nothing = true,
            "endfunction" | "endtask" | "endgenerate" => self.complete(),
            "module" | "macromodule" | "package" | "interface" | "program" | "primitive" if !opens_nothing => {
                self.open += 1;
                if self.open > MAX_OPEN && self.refused.is_none() {
                    self.refused = Some(Refusal::TooDeep(at));
                }
            }
            "endmodule" | "endpackage" | "endinterface" | "endprogram" | "endprimitive" => {
                self.open = self.open.saturating_sub(1);
                self.complete();
                self.closed_outermost = self.open == 0;
            }
            _ => {}
        }
    }

    fn symbol(&mut self, bytes: &[u8], at: usize) -> usize {
        self.token();
        match bytes[at] {
            b'(' => self.open(PARENTHESIS, at),
            b'[' => self.open(BRACKET, at),
            b'{' => self.open(BRACE, at),
            b')' | b']' | b'}' => self.close(),
            b',' => self.end_operators(),
            b';' => self.complete(),
            first => {
                self.add_operator(at);
                // Two characters of one operator count once; a run of prefix operators counts each.
                let doubles = matches!(first, b'&' | b'|' | b'=' | b'!' | b'<' | b'>' | b'*' | b'-' | b'+');
                let second = bytes.get(at + 1).is_some_and(|&next| next == first || matches!(next, b'=' | b'>' | b':'));
                return at + 1 + usize::from(doubles && second);
            }
        }
        at + 1
    }

    /// Keeps track of the directives that reach into later pieces.
    fn directive(&mut self, text: &str, at: usize) -> usize {
        let Some((name, end)) = identifier(text, at + 1) else {
            self.token();
            return at + 1;
        };
        // The parser reads a directive as white space, so it ends no statement.
        self.has_tokens = true;
        let blanks = text[end..].len() - text[end..].trim_start().len();
        let argument = end + blanks;
        match name {
            "default_nettype" => {
                let Some((kind, end)) = identifier(text, argument) else { return end };
                self.default_nettype = format!("`default_nettype {kind} ");
                end
            }
            "resetall" => {
                self.default_nettype.clear();
                end
            }
            "begin_keywords" if text[argument..].starts_with('"') => {
                let end = string_end(text.as_bytes(), argument);
                self.keywords.push(format!("`begin_keywords {} ", &text[argument..end]));
                end
            }
            "end_keywords" => {
                self.keywords.pop();
                end
            }
            _ => end,
        }
    }

    /// Ends the piece behind the end keyword before `at` and its label.
    fn cut(&mut self, text: &str, at: usize) -> usize {
        self.closed_outermost = false;
        let skip = |at: usize| at + text[at..].len() - text[at..].trim_start().len();
        let colon = skip(at);
        let mut end = at;
        if text[colon..].starts_with(':')
            && let Some((_, label_end)) = identifier(text, skip(colon + 1))
        {
            end = label_end;
        }
        self.finish_at(text, end);
        end
    }

    fn finish(&mut self, text: &str) {
        self.finish_at(text, text.len());
    }

    fn finish_at(&mut self, text: &str, end: usize) {
        let start = self.start + (text[self.start..end].len() - text[self.start..end].trim_start().len());
        if self.has_tokens && start < end {
            if self.refused.is_none() && end - start > MAX_PIECE && significant(&text[start..end]) > MAX_PIECE {
                self.refused = Some(Refusal::TooLong(start));
            }
            let prefix = std::mem::take(&mut self.prefix);
            self.chunks.push(Chunk { start, end, prefix, refused: self.refused.take() });
        }
        self.start = end;
        self.has_tokens = false;
        self.frames.clear();
        self.cost = 0;
        self.complete = false;
        self.prefix = self.keywords.last().cloned().unwrap_or_default() + &self.default_nettype;
    }
}

/// Bytes that are no white space.
fn significant(text: &str) -> usize {
    text.bytes().filter(|byte| !byte.is_ascii_whitespace()).count()
}

#[cfg(test)]
mod tests {
    use super::*;

    fn cut(text: &str) -> Vec<(String, String)> {
        chunks(text).into_iter().map(|chunk| (chunk.prefix, text[chunk.start..chunk.end].to_string())).collect()
    }

    fn refused(text: &str) -> bool {
        chunks(text).iter().any(|chunk| chunk.refused.is_some())
    }

    #[test]
    fn pieces_end_with_the_outermost_module() {
        let text = "typedef logic t; module a; module inner; endmodule endmodule : a\n`default_nettype none\nmodule b; \
                    endmodule primitive p(o, i); endprimitive ";
        let none = "`default_nettype none ".to_string();
        let expected = [
            (String::new(), "typedef logic t; module a; module inner; endmodule endmodule : a".to_string()),
            (String::new(), "`default_nettype none\nmodule b; endmodule".to_string()),
            (none, "primitive p(o, i); endprimitive".to_string()),
        ];
        assert_eq!(cut(text), expected);
        assert_eq!(cut("  \n "), []);
    }

    #[test]
    fn what_opens_no_module_does_not_glue_pieces() {
        let text = "extern module a(input x); module b(interface c); endmodule module d; endmodule";
        assert_eq!(cut(text).len(), 1, "an open interface port keeps the pieces together, which is safe");
        let text = "module b; virtual interface bus v; endmodule module d; string s = \"endmodule\"; endmodule";
        assert_eq!(cut(text).len(), 2);
    }

    #[test]
    fn deep_nesting_is_refused_and_long_files_are_not() {
        let module = |body: &str| format!("module m; {body} endmodule\n");
        assert!(refused(&module(&format!("assign y = {}a{};", "(".repeat(10_000), ")".repeat(10_000)))));
        assert!(refused(&module(&format!("assign y = a{};", " & a".repeat(100_000)))));
        assert!(refused(&module(&format!("always @* {} y = a;", "if (b) ".repeat(2_000)))));
        assert!(refused(&module(&format!("assign y = {}a;", "~".repeat(2_000)))));
        assert!(refused(&"module m; ".repeat(4_000)) && !refused(&module(&module("").repeat(4_000))));
        assert!(!refused(&module(&"assign y = a & (b | 4'b1??0);\n".repeat(50_000))));
        assert!(!refused(&module(&format!("always @* {} y = a;", "if (b) begin y = c; end else ".repeat(5_000)))));
        assert!(!refused(&module(&format!("assign y = {{{} b}};", "a[3] & c, ".repeat(20_000)))));
        let case = format!("always @* case (x) {} endcase", "8'h1?: begin y = a; end ".repeat(20_000));
        assert!(!refused(&module(&case)));
    }

    #[test]
    fn a_piece_that_is_too_long_is_refused() {
        let module = format!("module m; {} endmodule module n; endmodule", "assign y = a;".repeat(500_000));
        let chunks = chunks(&module);
        assert_eq!(chunks.iter().map(|chunk| chunk.refused).collect::<Vec<_>>(), [Some(Refusal::TooLong(0)), None]);
    }
}
