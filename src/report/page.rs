//! A page in Markdown laid out for a terminal: headings stand out, text is wrapped, lists and tables are aligned, code is
//! left as it is. What the pages of the rules do not use, such as pictures, is shown as its text.
//!
//! Invariant: every word of the page is in the result, in order.

use codespan_reporting::term::termcolor::{Buffer, Color, ColorSpec, WriteColor};
use markdown::mdast::{Node, Table};
use markdown::{ParseOptions, to_mdast};
use std::io::Write;

/// How the page is to look.
#[derive(Clone, Copy, PartialEq, Eq, Debug)]
pub struct Look {
    /// Of the terminal; the text takes at most [`WIDEST`] of them.
    pub columns: usize,
    /// Emphasis by escape sequences. Without them code stands in grave accents.
    pub colours: bool,
}

/// Longer lines are hard to read.
const WIDEST: usize = 100;
/// Narrower text is no text; lines then run over.
const NARROWEST: usize = 30;
/// Everything but headings begins here.
const MARGIN: usize = 2;
/// Blocks of code begin so much further in.
const CODE: usize = 2;
/// Between the columns of a table.
const GAP: usize = 2;

/// Lays out a page of Markdown.
pub fn render(markdown: &str, look: &Look) -> String {
    // Only extensions that the options do not switch on can fail.
    let Ok(root) = to_mdast(markdown, &ParseOptions::gfm()) else { return markdown.to_string() };
    let buffer = if look.colours { Buffer::ansi() } else { Buffer::no_color() };
    let mut page = Page { buffer, coloured: look.colours, empty: true };
    let width = look.columns.clamp(NARROWEST, WIDEST) - MARGIN;
    root.children().into_iter().flatten().for_each(|block| page.block(block, MARGIN, width));
    String::from_utf8_lossy(page.buffer.as_slice()).into_owned()
}

#[derive(Clone, Copy, PartialEq, Eq)]
enum Style {
    Plain,
    Heading,
    Strong,
    Emphasis,
    Code,
}

/// What stands between two blanks; its parts may differ in style.
type Word = Vec<(String, Style)>;

struct Page {
    buffer: Buffer,
    coloured: bool,
    /// Nothing is written yet, so that no empty line comes first.
    empty: bool,
}

impl Page {
    /// Writes a block that begins at column `indent` and is `width` columns wide.
    fn block(&mut self, block: &Node, indent: usize, width: usize) {
        match block {
            Node::Heading(heading) => {
                self.part();
                self.lines(&self.words(&heading.children, Style::Heading), indent - MARGIN, width + MARGIN);
            }
            Node::Code(code) => {
                self.part();
                for line in code.value.lines() {
                    let line =
                        format!("{:indent$}{line}", "", indent = if line.is_empty() { 0 } else { indent + CODE });
                    self.put(&line, Style::Plain);
                    self.put("\n", Style::Plain);
                }
            }
            Node::List(list) => {
                self.part();
                let first = list.start.unwrap_or(1) as usize;
                for (number, item) in list.children.iter().enumerate() {
                    let marker = if list.ordered { format!("{}. ", first + number) } else { "- ".to_string() };
                    self.item(item, &marker, indent, width);
                }
            }
            Node::Table(table) => {
                self.part();
                self.table(table, indent, width);
            }
            Node::Paragraph(paragraph) => {
                self.part();
                self.lines(&self.words(&paragraph.children, Style::Plain), indent, width);
            }
            other => {
                self.part();
                self.lines(&self.words(std::slice::from_ref(other), Style::Plain), indent, width);
            }
        }
    }

    /// The first paragraph stands behind the marker, all else below it.
    fn item(&mut self, item: &Node, marker: &str, indent: usize, width: usize) {
        let blocks = item.children().map_or(&[][..], Vec::as_slice);
        let (indent, width) = (indent + marker.len(), width.saturating_sub(marker.len()));
        let mut blocks = blocks.iter();
        self.put(&format!("{:1$}{marker}", "", indent - marker.len()), Style::Plain);
        if let Some(first) = blocks.next() {
            let words = self.words(std::slice::from_ref(first), Style::Plain);
            for (number, line) in filled(&words, width).iter().enumerate() {
                self.line(line, if number == 0 { 0 } else { indent });
            }
        }
        blocks.for_each(|block| self.block(block, indent, width));
    }

    fn table(&mut self, table: &Table, indent: usize, width: usize) {
        let style = |row: usize| if row == 0 { Style::Strong } else { Style::Plain };
        let cells = |(row, node): (usize, &Node)| -> Vec<Vec<Word>> {
            let cells = node.children().into_iter().flatten();
            cells.map(|cell| self.words(std::slice::from_ref(cell), style(row))).collect()
        };
        let rows: Vec<Vec<Vec<Word>>> = table.children.iter().enumerate().map(cells).collect();
        let widths = widths(&rows, width);
        for (number, row) in rows.iter().enumerate() {
            let cells: Vec<Vec<Vec<Word>>> =
                row.iter().zip(&widths).map(|(cell, &width)| filled(cell, width)).collect();
            for height in 0..cells.iter().map(Vec::len).max().unwrap_or(0) {
                self.put(&" ".repeat(indent), Style::Plain);
                let mut behind = 0;
                for (cell, width) in cells.iter().zip(&widths) {
                    let Some(line) = cell.get(height) else {
                        behind += width + GAP;
                        continue;
                    };
                    self.put(&" ".repeat(behind), Style::Plain);
                    line.iter().enumerate().for_each(|(place, word)| self.word(word, place > 0));
                    behind = width.saturating_sub(length(line)) + GAP;
                }
                self.put("\n", Style::Plain);
            }
            if number == 0 {
                let rules: Vec<String> = widths.iter().map(|&width| "-".repeat(width)).collect();
                self.put(&format!("{:indent$}{}\n", "", rules.join(&" ".repeat(GAP))), Style::Plain);
            }
        }
    }

    /// An empty line before every block but the first.
    fn part(&mut self) {
        if !self.empty {
            self.put("\n", Style::Plain);
        }
    }

    fn lines(&mut self, words: &[Word], indent: usize, width: usize) {
        filled(words, width).iter().for_each(|line| self.line(line, indent));
    }

    fn line(&mut self, line: &[Word], indent: usize) {
        self.put(&" ".repeat(indent), Style::Plain);
        line.iter().enumerate().for_each(|(place, word)| self.word(word, place > 0));
        self.put("\n", Style::Plain);
    }

    fn word(&mut self, word: &Word, blank: bool) {
        if blank {
            self.put(" ", Style::Plain);
        }
        word.iter().for_each(|(text, style)| self.put(text, *style));
    }

    fn put(&mut self, text: &str, style: Style) {
        self.empty = false;
        let mut look = ColorSpec::new();
        match style {
            Style::Plain => {}
            Style::Heading => drop(look.set_bold(true).set_fg(Some(Color::Cyan))),
            Style::Strong => drop(look.set_bold(true)),
            Style::Emphasis => drop(look.set_italic(true)),
            Style::Code => drop(look.set_fg(Some(Color::Green))),
        }
        // Writing to memory cannot fail.
        if style == Style::Plain {
            let _ = self.buffer.write_all(text.as_bytes());
        } else {
            let _ = self.buffer.set_color(&look);
            let _ = self.buffer.write_all(text.as_bytes());
            let _ = self.buffer.reset();
        }
    }

    /// The words of these nodes, in `style` unless they say otherwise.
    fn words(&self, nodes: &[Node], style: Style) -> Vec<Word> {
        let mut runs = Vec::new();
        self.runs(nodes, style, &mut runs);
        let mut words: Vec<Word> = Vec::new();
        let mut parted = true;
        for (text, style) in runs {
            for (number, part) in text.split([' ', '\n']).enumerate() {
                parted |= number > 0;
                if part.is_empty() {
                    continue;
                }
                match words.last_mut() {
                    Some(word) if !parted => word.push((part.to_string(), style)),
                    _ => words.push(vec![(part.to_string(), style)]),
                }
                parted = false;
            }
        }
        words
    }

    fn runs(&self, nodes: &[Node], style: Style, runs: &mut Vec<(String, Style)>) {
        for node in nodes {
            match node {
                Node::Text(text) => runs.push((text.value.clone(), style)),
                Node::InlineCode(code) if self.coloured => runs.push((code.value.clone(), Style::Code)),
                Node::InlineCode(code) => runs.push((format!("`{}`", code.value), style)),
                Node::Strong(strong) => self.runs(&strong.children, Style::Strong, runs),
                Node::Emphasis(emphasis) => self.runs(&emphasis.children, Style::Emphasis, runs),
                Node::Break(_) => runs.push((" ".to_string(), style)),
                other => match other.children() {
                    Some(children) => self.runs(children, style, runs),
                    None => runs.push((other.to_string(), style)),
                },
            }
        }
    }
}

/// Columns that these words take on one line.
fn length(words: &[Word]) -> usize {
    words.iter().map(width_of).sum::<usize>() + words.len().saturating_sub(1)
}

fn width_of(word: &Word) -> usize {
    word.iter().map(|(text, _)| text.chars().count()).sum()
}

/// Words in lines of at most `width` columns; a longer word has its own line.
fn filled(words: &[Word], width: usize) -> Vec<Vec<Word>> {
    let mut lines: Vec<Vec<Word>> = Vec::new();
    let mut used = 0;
    for word in words {
        let needed = width_of(word);
        match lines.last_mut() {
            Some(line) if used + 1 + needed <= width => {
                line.push(word.clone());
                used += 1 + needed;
            }
            _ => {
                lines.push(vec![word.clone()]);
                used = needed;
            }
        }
    }
    lines
}

/// The widths of the columns: what they need, and if that is too much, the widest give way down to their longest word.
fn widths(rows: &[Vec<Vec<Word>>], width: usize) -> Vec<usize> {
    let columns = rows.iter().map(Vec::len).max().unwrap_or(0);
    let most = |of: &dyn Fn(&Vec<Word>) -> usize, column: usize| {
        rows.iter().filter_map(|row| row.get(column)).map(of).max().unwrap_or(0)
    };
    let mut widths: Vec<usize> = (0..columns).map(|column| most(&|cell| length(cell), column)).collect();
    let least: Vec<usize> =
        (0..columns).map(|column| most(&|cell| cell.iter().map(width_of).max().unwrap_or(0), column)).collect();
    let room = width.saturating_sub(GAP * columns.saturating_sub(1));
    while widths.iter().sum::<usize>() > room {
        let giving = (0..columns).filter(|&column| widths[column] > least[column]);
        let Some(widest) = giving.max_by_key(|&column| widths[column]) else { break };
        widths[widest] -= 1;
    }
    widths
}
