//! The fixed words of findings, read back: a word that is stored becomes the word of the program again, and one that the
//! program does not have is an error, so that no text of a damaged store passes for ours.

use serde::de::{Deserialize, Deserializer, Error};

/// A word that every output uses as it is.
pub(super) type Word = &'static str;

/// Every word that stands in such a field of a finding.
const WORDS: [&str; 17] = [
    "posedge",
    "negedge",
    "static-0",
    "static-1",
    "dynamic",
    "logic",
    "function",
    "any-state",
    "reachable-states",
    "first",
    "second",
    "both",
    "oscillates",
    "stores",
    "settles",
    "delay-dependent",
    "undecided",
];

fn known<E: Error>(text: &str) -> Result<Word, E> {
    let found = WORDS.into_iter().find(|word| *word == text);
    found.ok_or_else(|| E::custom(format!("`{text}` is no word of a finding")))
}

pub(super) fn word<'de, D: Deserializer<'de>>(deserializer: D) -> Result<Word, D::Error> {
    known(&String::deserialize(deserializer)?)
}

pub(super) fn word_if_any<'de, D: Deserializer<'de>>(deserializer: D) -> Result<Option<Word>, D::Error> {
    Option::<String>::deserialize(deserializer)?.as_deref().map(known).transpose()
}

pub(super) fn words<'de, D: Deserializer<'de>>(deserializer: D) -> Result<Vec<Word>, D::Error> {
    Vec::<String>::deserialize(deserializer)?.iter().map(|text| known(text)).collect()
}
