//! The function strings of Liberty: pins and state variables under `!` or `'` (inversion), `^`, `*` or `&` or nothing at all
//! (AND), `+` or `|` (OR), binding in this order, the tightest first, with `0`, `1` and parentheses. The structure is kept
//! as it was written, because it decides where a hazard can arise.

/// See the module documentation.
#[derive(Clone, PartialEq, Eq, Debug)]
pub enum Function {
    Constant(bool),
    /// A pin or a state variable.
    Name(String),
    Not(Box<Function>),
    And(Vec<Function>),
    Or(Vec<Function>),
    Xor(Box<Function>, Box<Function>),
}

/// Parentheses and inversions may be nested this deep.
const DEPTH: usize = 100;

impl Function {
    /// The structure of a function string.
    ///
    /// # Errors
    /// What is wrong with it.
    pub fn parse(text: &str) -> Result<Function, String> {
        let mut parser = Parser { tokens: tokens(text)?, at: 0, depth: 0 };
        let function = parser.or()?;
        match parser.tokens.get(parser.at) {
            None => Ok(function),
            Some(token) => Err(format!("`{token}` is not expected there")),
        }
    }

    pub fn name(name: &str) -> Function {
        Function::Name(name.to_string())
    }

    pub fn negated(self) -> Function {
        Function::Not(Box::new(self))
    }

    /// Every name in it, in order, repeated as often as it is used.
    pub fn names(&self) -> Vec<&str> {
        match self {
            Function::Constant(_) => Vec::new(),
            Function::Name(name) => vec![name],
            Function::Not(inner) => inner.names(),
            Function::And(parts) | Function::Or(parts) => parts.iter().flat_map(Function::names).collect(),
            Function::Xor(left, right) => [left.names(), right.names()].concat(),
        }
    }
}

fn tokens(text: &str) -> Result<Vec<String>, String> {
    let mut tokens = Vec::new();
    let mut letters = text.chars().peekable();
    while let Some(letter) = letters.next() {
        match letter {
            letter if letter.is_whitespace() => {}
            '!' | '\'' | '^' | '*' | '&' | '+' | '|' | '(' | ')' => tokens.push(letter.to_string()),
            letter if letter.is_alphanumeric() || matches!(letter, '_' | '\\' | '$') => {
                let mut name = String::from(letter);
                while let Some(&more) = letters.peek() {
                    // An index belongs to the name.
                    if more.is_alphanumeric() || matches!(more, '_' | '$' | '[' | ']' | '.') {
                        name.push(more);
                        letters.next();
                    } else {
                        break;
                    }
                }
                tokens.push(name);
            }
            other => return Err(format!("the letter `{other}` has no meaning there")),
        }
    }
    Ok(tokens)
}

struct Parser {
    tokens: Vec<String>,
    at: usize,
    depth: usize,
}

impl Parser {
    fn peek(&self) -> Option<&str> {
        self.tokens.get(self.at).map(String::as_str)
    }

    fn eat(&mut self, any: &[&str]) -> bool {
        let found = self.peek().is_some_and(|token| any.contains(&token));
        self.at += usize::from(found);
        found
    }

    fn or(&mut self) -> Result<Function, String> {
        let mut parts = vec![self.and()?];
        while self.eat(&["+", "|"]) {
            parts.push(self.and()?);
        }
        Ok(joined(parts, Function::Or))
    }

    fn and(&mut self) -> Result<Function, String> {
        let mut parts = vec![self.xor()?];
        loop {
            let juxtaposed = self.peek().is_some_and(|token| !["*", "&", "+", "|", ")", "^", "'"].contains(&token));
            if !self.eat(&["*", "&"]) && !juxtaposed {
                return Ok(joined(parts, Function::And));
            }
            parts.push(self.xor()?);
        }
    }

    fn xor(&mut self) -> Result<Function, String> {
        let mut left = self.inverted()?;
        while self.eat(&["^"]) {
            left = Function::Xor(Box::new(left), Box::new(self.inverted()?));
        }
        Ok(left)
    }

    fn inverted(&mut self) -> Result<Function, String> {
        self.depth += 1;
        if self.depth > DEPTH {
            return Err(format!("it is nested more than {DEPTH} deep"));
        }
        let mut function = if self.eat(&["!"]) {
            self.inverted()?.negated()
        } else if self.eat(&["("]) {
            let inner = self.or()?;
            if !self.eat(&[")"]) {
                return Err("a `)` is missing".to_string());
            }
            inner
        } else {
            match self.peek().map(str::to_string) {
                None => return Err("it ends too early".to_string()),
                Some(token) if token == "0" || token == "1" => {
                    self.at += 1;
                    Function::Constant(token == "1")
                }
                Some(token)
                    if token.starts_with(|letter: char| letter.is_alphanumeric() || "_\\$".contains(letter)) =>
                {
                    self.at += 1;
                    Function::Name(token.trim_start_matches('\\').to_string())
                }
                Some(token) => return Err(format!("`{token}` is not expected there")),
            }
        };
        while self.eat(&["'"]) {
            function = function.negated();
        }
        self.depth -= 1;
        Ok(function)
    }
}

/// One part stays itself; more are joined flat.
fn joined(mut parts: Vec<Function>, join: fn(Vec<Function>) -> Function) -> Function {
    match parts.len() {
        1 => parts.remove(0),
        _ => join(parts),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Fully parenthesised.
    fn shown(function: &Function) -> String {
        let list =
            |parts: &[Function], sign: &str| format!("({})", parts.iter().map(shown).collect::<Vec<_>>().join(sign));
        match function {
            Function::Constant(value) => u8::from(*value).to_string(),
            Function::Name(name) => name.clone(),
            Function::Not(inner) => format!("!{}", shown(inner)),
            Function::And(parts) => list(parts, "*"),
            Function::Or(parts) => list(parts, "+"),
            Function::Xor(left, right) => format!("({}^{})", shown(left), shown(right)),
        }
    }

    #[track_caller]
    fn reads(text: &str, wanted: &str) {
        assert_eq!(Function::parse(text).as_ref().map(shown), Ok(wanted.to_string()));
    }

    #[test]
    fn precedence_is_that_of_the_standard() {
        reads("A B + C", "((A*B)+C)");
        reads("!A & B | C'", "((!A*B)+!C)");
        reads("A ^ B * C", "((A^B)*C)");
        reads("!(A + B)' ^ C", "(!!(A+B)^C)");
        reads("A (B + 1)", "(A*(B+1))");
        reads("\tD[3] + IQ_1", "(D[3]+IQ_1)");
    }

    #[test]
    fn mistakes_are_named() {
        let error = |text: &str| Function::parse(text).expect_err("a mistake");
        assert_eq!(error("A +"), "it ends too early");
        assert_eq!(error("(A + B"), "a `)` is missing");
        assert_eq!(error("A # B"), "the letter `#` has no meaning there");
        assert_eq!(error("A )"), "`)` is not expected there");
        assert_eq!(error("* A"), "`*` is not expected there");
        assert!(error(&"(".repeat(1000)).contains("nested"));
    }
}
