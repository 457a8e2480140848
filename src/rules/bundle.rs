//! Signals as a reader wants them: the bits of one vector are told together, because a launch moves whole registers and
//! forty names that differ in a number hide what moves. The JSON keeps every bit by itself.

use std::collections::BTreeMap;

/// A vector whose bits lie in more runs than this is told by how many bits they are.
const RUNS: usize = 4;

/// A signal, or some bits of one vector.
#[derive(Clone, PartialEq, Eq, Debug)]
pub(crate) struct Bundle<'a> {
    vector: &'a str,
    /// The highest first; empty for a signal that is no bit of a vector.
    bits: Vec<u64>,
}

/// A name and the index at its end.
pub(crate) fn split(name: &str) -> (&str, Option<u64>) {
    let parts = name.strip_suffix(']').and_then(|inner| inner.rsplit_once('['));
    match parts.and_then(|(vector, index)| Some((vector, index.parse().ok()?))) {
        Some((vector, index)) => (vector, Some(index)),
        None => (name, None),
    }
}

/// The signals of a list by vector, in the order of their names.
pub(crate) fn bundles<'a>(names: impl IntoIterator<Item = &'a str>) -> Vec<Bundle<'a>> {
    let mut known: BTreeMap<(&str, bool), Vec<u64>> = BTreeMap::new();
    for name in names {
        let (vector, bit) = split(name);
        known.entry((vector, bit.is_some())).or_default().extend(bit);
    }
    let bundle = |((vector, _), mut bits): ((&'a str, bool), Vec<u64>)| {
        bits.sort_unstable_by(|low, high| high.cmp(low));
        bits.dedup();
        Bundle { vector, bits }
    };
    known.into_iter().map(bundle).collect()
}

impl Bundle<'_> {
    /// How many signals it stands for.
    pub(crate) fn len(&self) -> usize {
        self.bits.len().max(1)
    }

    /// "`a`", "`a[3]`", "bits 7:4 and 1 of `a`", "9 bits of `a`".
    pub(crate) fn quoted(&self) -> String {
        let vector = self.vector;
        match self.bits.as_slice() {
            [] => format!("`{vector}`"),
            [bit] => format!("`{vector}[{bit}]`"),
            bits => {
                let runs: Vec<String> = runs(bits);
                match runs.split_last() {
                    Some((_, rest)) if rest.len() >= RUNS => format!("{} bits of `{vector}`", bits.len()),
                    Some((last, rest)) if !rest.is_empty() => {
                        format!("bits {} and {last} of `{vector}`", rest.join(", "))
                    }
                    _ => format!("bits {} of `{vector}`", runs.join("")),
                }
            }
        }
    }
}

/// "7:4", "1": falling indices as ranges.
fn runs(bits: &[u64]) -> Vec<String> {
    let follows = |high: &u64, low: &u64| low + 1 == *high;
    let run = |bits: &[u64]| match bits {
        [first, .., last] => format!("{first}:{last}"),
        [only] => only.to_string(),
        [] => String::new(),
    };
    bits.chunk_by(follows).map(run).collect()
}

/// "`a`, bits 3:0 of `b` and 12 more": at most `shown` bundles by name, and how many signals are left.
pub(crate) fn listed<'a>(names: impl IntoIterator<Item = &'a str>, shown: usize) -> String {
    let bundles = bundles(names);
    let named: Vec<String> = bundles.iter().take(shown).map(Bundle::quoted).collect();
    let more: usize = bundles.iter().skip(shown).map(Bundle::len).sum();
    match (named.split_last(), more) {
        (None, _) => String::new(),
        (Some((last, [])), 0) => last.clone(),
        (Some((last, rest)), 0) => format!("{} and {last}", rest.join(", ")),
        (Some(_), more) => format!("{} and {more} more", named.join(", ")),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn bits_of_a_vector_are_told_together() {
        let names = ["t.a[1]", "t.b", "t.a[7]", "t.a[6]", "t.m[0][3]", "t.m[1][3]", "t.a[1]"];
        assert_eq!(listed(names, 9), "bits 7:6 and 1 of `t.a`, `t.b`, `t.m[0][3]` and `t.m[1][3]`");
        assert_eq!(listed(names, 2), "bits 7:6 and 1 of `t.a`, `t.b` and 2 more");
        assert_eq!(listed(["t.a[3]", "t.a[2]"], 1), "bits 3:2 of `t.a`");
        assert_eq!(listed(["t.a", "t.a[0]"], 3), "`t.a` and `t.a[0]`");
    }

    #[test]
    fn scattered_bits_are_counted() {
        let names: Vec<String> = (0..5).map(|bit| format!("t.a[{}]", 2 * bit)).collect();
        assert_eq!(listed(names.iter().map(String::as_str), 3), "5 bits of `t.a`");
    }
}
