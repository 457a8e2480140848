//! Mutations of Verilog text, by tokens and by lines. Most keep the text near the language, so that it passes the
//! parser and reaches elaboration: a name becomes another name of the same text, an operator another operator, a number
//! an extreme one. Some do not: unbalanced, truncated, bytes that are no text.

use fastrand::Rng;

use crate::corpus::Input;
use crate::dictionary::DICTIONARY;

/// No mutation grows a file beyond this.
const MAX_SIZE: usize = 300_000;

const ODD_BYTES: &[&[u8]] = &[
    b"\xff",
    b"\x00",
    b"\xef\xbb\xbf",
    "é".as_bytes(),
    "日本語".as_bytes(),
    "\u{2028}".as_bytes(),
    "\u{202e}".as_bytes(),
    "\u{a0}".as_bytes(),
    "🦀".as_bytes(),
    b"\r",
    b"\r\n",
    b"\x0c",
    b"\x0b",
    b"\x1b[31m",
    b"\xc3",
    b"\xf0\x9f",
    b"\x7f",
    "e\u{301}".as_bytes(),
    b"\t",
    b"\\\n",
    b"\\\r\n",
    b"#",
    b"@",
    b"$",
    b"`",
    b"'",
    b"``",
    b"\xed\xa0\x80",
];

/// Applies a few mutations to `input`; `other` lends text.
pub fn mutate(input: &mut Input, other: &Input, rng: &mut Rng) {
    let lender = &other.files[rng.usize(..other.files.len())].1;
    // Half of the inputs have a single one, so that they get past the parser.
    let most = if rng.bool() { 1 } else { rng.usize(2..8) };
    for _ in 0..rng.usize(1..=most) {
        let file = rng.usize(..input.files.len());
        let text = &mut input.files[file].1;
        *text = if rng.u32(..4) == 0 { by_line(text, lender, rng) } else { by_token(text, lender, rng) };
        text.truncate(MAX_SIZE);
    }
    if rng.u32(..12) == 0 {
        split_off_a_header(input, rng);
    }
}

/// The pieces of Verilog text; joined they are the text.
pub fn tokens(text: &[u8]) -> Vec<&[u8]> {
    let mut tokens = Vec::new();
    let mut at = 0;
    while at < text.len() {
        let rest = &text[at..];
        let run = |test: fn(u8) -> bool| 1 + rest[1..].iter().take_while(|byte| test(**byte)).count();
        let length = match rest[0] {
            byte if byte.is_ascii_whitespace() => run(|byte| byte.is_ascii_whitespace()),
            b'/' if rest.starts_with(b"//") => rest.iter().take_while(|byte| **byte != b'\n').count(),
            b'/' if rest.starts_with(b"/*") => {
                rest.windows(2).skip(2).position(|two| two == b"*/").map_or(rest.len(), |end| end + 4)
            }
            b'"' => rest[1..].iter().position(|byte| matches!(byte, b'"' | b'\n')).map_or(rest.len(), |end| end + 2),
            b'\\' => run(|byte| !byte.is_ascii_whitespace()),
            b'0'..=b'9' => run(|byte| byte.is_ascii_alphanumeric() || matches!(byte, b'\'' | b'?' | b'_')),
            b'a'..=b'z' | b'A'..=b'Z' | b'_' | b'$' | b'`' => {
                run(|byte| byte.is_ascii_alphanumeric() || matches!(byte, b'_' | b'$'))
            }
            byte if b"<>=&|*+-:!~^".contains(&byte) => run(|byte| b"<>=&|*+-:^".contains(&byte)).min(3),
            _ => 1,
        };
        let length = length.min(rest.len());
        tokens.push(&rest[..length]);
        at += length;
    }
    tokens
}

fn is_blank(token: &[u8]) -> bool {
    token.first().is_none_or(u8::is_ascii_whitespace) || token.starts_with(b"//") || token.starts_with(b"/*")
}

fn is_name(token: &[u8]) -> bool {
    let starts = |byte: &u8| byte.is_ascii_alphabetic() || *byte == b'_';
    token.first().is_some_and(starts) && !is_keyword(token)
}

fn is_keyword(token: &[u8]) -> bool {
    DICTIONARY.words.iter().any(|word| word.as_bytes() == token)
}

fn is_number(token: &[u8]) -> bool {
    token.first().is_some_and(u8::is_ascii_digit)
}

fn is_operator(token: &[u8]) -> bool {
    DICTIONARY.operators.iter().any(|operator| operator.as_bytes() == token)
}

/// A token that passes `test`, by its index.
fn find(tokens: &[&[u8]], test: fn(&[u8]) -> bool, rng: &mut Rng) -> Option<usize> {
    let fitting: Vec<usize> = (0..tokens.len()).filter(|&index| test(tokens[index])).collect();
    rng.choice(fitting)
}

fn choose<'a>(words: &'a [impl AsRef<str>], rng: &mut Rng) -> &'a [u8] {
    words[rng.usize(..words.len())].as_ref().as_bytes()
}

/// A run of at most `most` pieces of something with `length` pieces.
fn range(length: usize, most: usize, rng: &mut Rng) -> std::ops::Range<usize> {
    let start = rng.usize(..=length);
    start..(start + rng.usize(1..=most)).min(length)
}

fn by_token(text: &[u8], lender: &[u8], rng: &mut Rng) -> Vec<u8> {
    let mut tokens = tokens(text);
    let at = rng.usize(..=tokens.len());
    let few = if rng.u32(..3) == 0 { 40 } else { 4 };
    match rng.u32(..30) {
        0..=5 => {
            if let (Some(to), Some(from)) = (find(&tokens, is_name, rng), find(&tokens, is_name, rng)) {
                tokens[to] = tokens[from];
            }
        }
        6..=8 => replace(&mut tokens, is_number, &DICTIONARY.numbers, rng),
        9 => replace(&mut tokens, is_name, &DICTIONARY.numbers, rng),
        10 | 11 => replace(&mut tokens, is_operator, &DICTIONARY.operators, rng),
        12 => replace(&mut tokens, is_name, &DICTIONARY.words, rng),
        13 => replace(&mut tokens, is_keyword, &DICTIONARY.words, rng),
        14 => tokens.insert(at, choose(&DICTIONARY.words, rng)),
        15..=17 => tokens.splice(at..at, [&b" "[..], choose(&DICTIONARY.snippets, rng), b" "]).for_each(drop),
        18 | 19 => tokens.drain(range(tokens.len(), few, rng)).for_each(drop),
        20 | 21 => {
            let copied = tokens[range(tokens.len(), few, rng)].to_vec();
            tokens.splice(at..at, copied);
        }
        22 => {
            let (a, b) = (find(&tokens, |token| !is_blank(token), rng), find(&tokens, |token| !is_blank(token), rng));
            if let (Some(a), Some(b)) = (a, b) {
                tokens.swap(a, b);
            }
        }
        23 | 24 => {
            let lent = crate::mutate::tokens(lender);
            let lent = lent[range(lent.len(), 60, rng)].to_vec();
            let replaced = range(tokens.len(), few, rng);
            tokens.splice(replaced, lent);
        }
        25 => tokens.insert(at, ODD_BYTES[rng.usize(..ODD_BYTES.len())]),
        26 => return nest(&tokens, rng),
        27 => return repeat(&tokens, rng),
        28 => tokens.truncate(at),
        _ => return odd_byte(text, rng),
    }
    tokens.concat()
}

fn replace(tokens: &mut [&[u8]], test: fn(&[u8]) -> bool, by: &'static [&'static str], rng: &mut Rng) {
    if let Some(at) = find(tokens, test, rng) {
        tokens[at] = choose(by, rng);
    }
}

/// Wraps a token, or a run of them, in many brackets of one kind.
fn nest(tokens: &[&[u8]], rng: &mut Rng) -> Vec<u8> {
    const PAIRS: &[(&str, &str)] = &[
        ("(", ")"),
        ("{", "}"),
        ("[", "]"),
        (" begin ", " end "),
        ("~(", ")"),
        ("{2{", "}}"),
        ("(a ? ", " : b)"),
        ("'{", "}"),
        (" if (a) ", " else ; "),
        (" if (1) begin : g ", " end "),
        ("f(", ")"),
        ("- ", ""),
        ("a + ", ""),
        ("`ifdef A\n", "\n`endif "),
        (" case (a) 1: ", " endcase "),
        ("a[", "]"),
        ("a.", ""),
        (" for (int i = 0; i < 2; i++) ", ""),
        (" module m; ", " endmodule "),
        (" struct packed { ", " x; } "),
        (" generate ", " endgenerate "),
        ("signed'(", ")"),
        ("$clog2(", ")"),
        ("a::", ""),
        ("/*", "*/"),
        (" function f; ", " endfunction "),
        (" fork ", " join "),
        ("(* x *) ", ""),
        ("#(", ")"),
        ("@(", ")"),
        ("`A(", ")"),
        ("!", ""),
        ("(a, ", ")"),
    ];
    let part = range(tokens.len(), 12, rng);
    let depth = [2, 5, 20, 100, 150, 199, 250, 1000, 5000][rng.usize(..9)];
    let (open, close) = PAIRS[rng.usize(..PAIRS.len())];
    let inner = tokens[part.clone()].concat();
    [
        &tokens[..part.start].concat()[..],
        open.repeat(depth).as_bytes(),
        &inner,
        close.repeat(depth).as_bytes(),
        &tokens[part.end..].concat(),
    ]
    .concat()
}

/// Writes a run of tokens many times.
fn repeat(tokens: &[&[u8]], rng: &mut Rng) -> Vec<u8> {
    let part = range(tokens.len(), 20, rng);
    let count = [2, 10, 100, 1000][rng.usize(..4)];
    let inner = tokens[part.clone()].concat();
    let most = (MAX_SIZE / 4).checked_div(inner.len()).unwrap_or(1);
    [tokens[..part.start].concat(), inner.repeat(count.min(most)), tokens[part.end..].concat()].concat()
}

fn odd_byte(text: &[u8], rng: &mut Rng) -> Vec<u8> {
    let mut text = text.to_vec();
    if !text.is_empty() {
        let at = rng.usize(..text.len());
        text[at] = rng.u8(..);
    }
    text
}

fn by_line(text: &[u8], lender: &[u8], rng: &mut Rng) -> Vec<u8> {
    let lines = |text| -> Vec<&[u8]> { <[u8]>::split_inclusive(text, |&byte| byte == b'\n').collect() };
    let mut own = lines(text);
    let lent = lines(lender);
    let at = rng.usize(..=own.len());
    match rng.u32(..6) {
        0 => own.drain(range(own.len(), 4, rng)).for_each(drop),
        1 => {
            let copied = own[range(own.len(), 6, rng)].to_vec();
            own.splice(at..at, copied);
        }
        2 if own.len() > 1 => {
            let (a, b) = (rng.usize(..own.len()), rng.usize(..own.len()));
            own.swap(a, b);
        }
        3 => {
            own.splice(at..at, lent[range(lent.len(), 12, rng)].to_vec());
        }
        4 => {
            // A whole file before or behind: its modules can then be instantiated.
            let at = if rng.bool() { 0 } else { own.len() };
            own.splice(at..at, lent);
        }
        _ => own.truncate(at),
    }
    own.concat()
}

/// Moves lines of the first file to a second one, which the first includes or which stands beside it.
fn split_off_a_header(input: &mut Input, rng: &mut Rng) {
    let text = &input.files[0].1;
    let lines: Vec<&[u8]> = text.split_inclusive(|&byte| byte == b'\n').collect();
    let part = range(lines.len(), 20, rng);
    let header = lines[part.clone()].concat();
    let include: &[u8] = if rng.u32(..4) == 0 { b"" } else { b"`include \"second.svh\"\n" };
    let rest = [lines[..part.start].concat(), include.to_vec(), lines[part.end..].concat()].concat();
    let name = if include.is_empty() { "second.sv" } else { "second.svh" };
    input.files[0].1 = rest;
    input.files.retain(|(other, _)| other != name);
    input.files.push((name.to_string(), header));
}
