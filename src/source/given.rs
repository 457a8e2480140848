//! A parameter value from the command line, `NAME=VALUE`. It is parsed as what it stands for, an override in an
//! instance, so that everything is understood that an instance may write there: expressions, texts, types, patterns.
//!
//! Invariant: whatever the text holds, it is one override of the one parameter named, or an error.

use super::chunks::chunks;
use super::origin::MappedText;
use super::parse::parse;
use super::{PathError, SourceSet};
use crate::syntax::ast::{Connection, Expr, ItemKind, Unit};

/// A value for a parameter of the top modules.
#[derive(Clone, Debug)]
pub struct Given {
    pub name: String,
    /// The value as it was written.
    pub text: String,
    pub value: Expr,
}

/// Parses the value of `name`. The text is added to `sources`, so that places in it can be shown.
///
/// # Errors
/// A text that is no expression and no type.
pub fn given(name: &str, value: &str, sources: &mut SourceSet) -> Result<Given, PathError> {
    let option = format!("--set {name}={value}");
    let file = sources.add(option.as_str(), value);
    let mut text = MappedText::default();
    let place = super::Span { file, start: 0, end: 0 };
    text.push_whole(&format!("module \\--set ; \\--set #(.{name}("), place);
    text.push_verbatim(value, file, 0);
    text.push_whole(")) given(); endmodule", place);
    let wrong = || {
        let help =
            "the value is an expression as in Verilog; a text stands in double quotes, as in `--set 'NAME=\"text\"'`";
        PathError::new(format!("the value in `{option}` is no expression"), help)
    };
    // A comment in the value would swallow the rest, and a semicolon begin something else: both leave not one piece of
    // one instance.
    let pieces = chunks(&text.text);
    let [piece] = pieces.as_slice() else { return Err(wrong()) };
    let parsed = parse(&text, piece, file, false);
    if !parsed.failures.is_empty() {
        return Err(wrong());
    }
    let value_of = only_override(parsed.unit).filter(|(parameter, _)| parameter == name);
    let (name, parsed) = value_of.ok_or_else(wrong)?;
    Ok(Given { name, text: value.to_string(), value: parsed })
}

/// The name and value of the one override in the one instance of the one module of `unit`.
fn only_override(unit: Unit) -> Option<(String, Expr)> {
    let [module] = <[_; 1]>::try_from(unit.modules).ok()?;
    let [item] = <[_; 1]>::try_from(module.items).ok()?;
    let ItemKind::Instances { params, .. } = item.kind else { return None };
    let [param] = <[_; 1]>::try_from(params).ok()?;
    match param {
        Connection::Named { name, value: Some(value) } => Some((name.name, value)),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_one_value_is_taken() {
        let good = |value: &str| given("P", value, &mut SourceSet::default()).is_ok();
        for value in ["2", "8'hff", "pkg::NAME", "\"a text\"", "W*2+$clog2(9)", "'{1, 2}", "logic [7:0]", "1.5"] {
            assert!(good(value), "{value}");
        }
        for value in ["", "1), .Q(2", "1 2", "1)) x(); a #(.P(2", "// 1", "/*", "1;", "\"open", "endmodule"] {
            assert!(!good(value), "{value}");
        }
    }
}
