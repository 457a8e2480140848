//! Types, variables and expressions of the grammar.

use fastrand::Rng;

/// A type as the grammar knows it.
#[derive(Clone)]
pub enum Type {
    /// Anything with bits that can be selected; `text` declares it.
    Vector {
        text: String,
        width: usize,
    },
    /// `logic [outer-1:0][inner-1:0]`.
    Packed {
        outer: usize,
        inner: usize,
    },
    Enum {
        name: String,
        members: Vec<String>,
    },
    /// A packed structure or union.
    Struct {
        name: String,
        fields: Vec<(String, Type)>,
        is_union: bool,
    },
}

impl Type {
    pub fn vector(text: &str, width: usize) -> Self {
        Self::Vector { text: text.to_string(), width }
    }

    pub fn text(&self) -> String {
        match self {
            Self::Vector { text, .. } => text.clone(),
            Self::Packed { outer, inner } => format!("logic [{}:0][{}:0]", outer - 1, inner - 1),
            Self::Enum { name, .. } | Self::Struct { name, .. } => name.clone(),
        }
    }

    /// The type as a user outside of its package names it.
    pub fn within(&self, package: &str) -> Self {
        let full = |name: &String| if name.contains("::") { name.clone() } else { format!("{package}::{name}") };
        match self.clone() {
            Self::Enum { name, members } => {
                Self::Enum { name: full(&name), members: members.iter().map(full).collect() }
            }
            Self::Struct { name, fields, is_union } => {
                let fields = fields.into_iter().map(|(field, ty)| (field, ty.within(package))).collect();
                Self::Struct { name: full(&name), fields, is_union }
            }
            other => other,
        }
    }

    fn plain(rng: &mut Rng) -> Self {
        let width = rng.usize(1..17);
        match rng.u32(..8) {
            0 => Self::vector("int", 32),
            1 => Self::vector("byte", 8),
            2 => Self::vector("bit", 1),
            3 => Self::Vector { text: format!("logic signed [{}:0]", width - 1), width },
            4 => Self::Packed { outer: rng.usize(1..5), inner: rng.usize(1..5) },
            _ => Self::Vector { text: format!("logic [{}:0]", width - 1), width },
        }
    }
}

#[derive(Clone)]
pub struct Variable {
    pub name: String,
    pub ty: Type,
    /// Sizes of the unpacked dimensions.
    pub unpacked: Vec<usize>,
}

impl Variable {
    pub fn plain(name: &str, ty: Type) -> Self {
        Self { name: name.to_string(), ty, unpacked: Vec::new() }
    }

    /// Sometimes an array.
    pub fn any(name: &str, scope: &Scope, rng: &mut Rng) -> Self {
        let dimensions = if rng.u32(..6) == 0 { rng.usize(1..3) } else { 0 };
        let unpacked = (0..dimensions).map(|_| rng.usize(1..4)).collect();
        Self { name: name.to_string(), ty: scope.some_type(rng), unpacked }
    }

    pub fn declaration(&self) -> String {
        let dimensions: String = self.unpacked.iter().map(|size| format!(" [{size}]")).collect();
        format!("{} {}{dimensions}", self.ty.text(), self.name)
    }

    /// A value for all of the variable.
    pub fn whole_value(&self, scope: &Scope, depth: usize, rng: &mut Rng) -> String {
        let element = scope.value(&self.ty, depth, rng);
        self.unpacked.iter().rev().fold(element, |inner, &size| match rng.u32(..2) {
            0 => format!("'{{{}}}", vec![inner; size].join(", ")),
            _ => format!("'{{default: {inner}}}"),
        })
    }

    /// Some part of the variable: a name with members and selects behind it.
    pub fn part(&self, scope: &Scope, rng: &mut Rng) -> String {
        let mut text = self.name.clone();
        for &size in &self.unpacked {
            text += &format!("[{}]", scope.index(size, rng));
        }
        select(text, &self.ty, scope, rng)
    }
}

fn select(text: String, ty: &Type, scope: &Scope, rng: &mut Rng) -> String {
    if rng.u32(..3) == 0 {
        return text;
    }
    match ty {
        Type::Vector { text: declared, width } if *width > 1 && declared != "T" => match rng.u32(..4) {
            0 => format!("{text}[{}]", scope.index(*width, rng)),
            1 => {
                let (a, b) = (rng.usize(..*width), rng.usize(..*width));
                format!("{text}[{}:{}]", a.max(b), a.min(b))
            }
            2 => format!("{text}[{} +: {}]", rng.usize(..*width), 1),
            _ => text,
        },
        Type::Packed { outer, inner } => {
            let element = format!("{text}[{}]", scope.index(*outer, rng));
            if rng.bool() { format!("{element}[{}]", scope.index(*inner, rng)) } else { element }
        }
        Type::Struct { fields, .. } => {
            let (field, ty) = &fields[rng.usize(..fields.len())];
            select(format!("{text}.{field}"), ty, scope, rng)
        }
        _ => text,
    }
}

#[derive(Clone)]
pub struct Function {
    pub name: String,
    pub arguments: Vec<Type>,
}

/// What can be used at a place.
#[derive(Clone, Default)]
pub struct Scope {
    pub types: Vec<Type>,
    pub constants: Vec<String>,
    pub variables: Vec<Variable>,
    pub functions: Vec<Function>,
}

impl Scope {
    pub fn some_type(&self, rng: &mut Rng) -> Type {
        if self.types.is_empty() || rng.bool() {
            Type::plain(rng)
        } else {
            self.types[rng.usize(..self.types.len())].clone()
        }
    }

    /// Declares one more type.
    pub fn typedef(&mut self, name: &str, rng: &mut Rng) -> String {
        let (text, ty) = match rng.u32(..4) {
            0 => {
                let members: Vec<String> =
                    (0..rng.usize(1..6)).map(|index| format!("{}_E{index}", name.to_uppercase())).collect();
                let base = ["", "logic [2:0] ", "bit [3:0] ", "int "][rng.usize(..4)];
                let text = format!("enum {base}{{{}}}", members.join(", "));
                (text, Type::Enum { name: name.to_string(), members })
            }
            1 => {
                let width = rng.usize(1..9);
                let text =
                    format!("union packed {{logic [{}:0] raw; logic signed [{}:0] number;}}", width - 1, width - 1);
                let field =
                    |name: &str| (name.to_string(), Type::Vector { text: format!("logic [{}:0]", width - 1), width });
                let fields = vec![field("raw"), field("number")];
                (text, Type::Struct { name: name.to_string(), fields, is_union: true })
            }
            _ => {
                let fields: Vec<(String, Type)> =
                    (0..rng.usize(1..5)).map(|index| (format!("f{index}"), self.some_type(rng))).collect();
                let list: String = fields.iter().map(|(field, ty)| format!("{} {field}; ", ty.text())).collect();
                let sign = ["", "signed "][rng.usize(..2)];
                let text = format!("struct packed {sign}{{{list}}}");
                (text, Type::Struct { name: name.to_string(), fields, is_union: false })
            }
        };
        self.types.push(ty);
        format!("  typedef {text} {name};\n")
    }

    /// An index for something of `size` elements.
    pub fn index(&self, size: usize, rng: &mut Rng) -> String {
        match self
            .variables
            .iter()
            .find(|variable| variable.unpacked.is_empty() && matches!(variable.ty, Type::Vector { .. }))
        {
            Some(variable) if rng.u32(..4) == 0 => variable.name.clone(),
            _ => rng.usize(..size).to_string(),
        }
    }

    /// An expression of constants.
    pub fn constant(&self, depth: usize, rng: &mut Rng) -> String {
        if depth == 0 || rng.u32(..4) == 0 {
            let number = rng.u32(..9).to_string();
            return if rng.bool() { number } else { rng.choice(&self.constants).cloned().unwrap_or(number) };
        }
        let (a, b) = (self.constant(depth - 1, rng), self.constant(depth - 1, rng));
        match rng.u32(..8) {
            0 => format!("$clog2({a})"),
            1 => format!("({a} == {b})"),
            2 => format!("({a} > {b} ? {b} : {a})"),
            3 => format!("$bits({})", self.some_type(rng).text()),
            operator => format!("({a} {} {b})", ["+", "-", "*", "|"][operator as usize - 4]),
        }
    }

    /// A value that can be assigned to a whole variable of type `ty`.
    pub fn value(&self, ty: &Type, depth: usize, rng: &mut Rng) -> String {
        let cast = |text: String| format!("{}'({text})", ty.text());
        match ty {
            Type::Enum { members, .. } => match rng.u32(..3) {
                0 => cast(self.expression(depth, rng)),
                _ => members[rng.usize(..members.len())].clone(),
            },
            Type::Struct { fields, is_union, .. } if !is_union && depth > 0 => match rng.u32(..5) {
                0 => "'{default: '0}".to_string(),
                1 => "'0".to_string(),
                2 => {
                    let values: Vec<String> = fields
                        .iter()
                        .map(|(field, ty)| format!("{field}: {}", self.value(ty, depth - 1, rng)))
                        .collect();
                    format!("'{{{}}}", values.join(", "))
                }
                3 => {
                    let values: Vec<String> = fields.iter().map(|(_, ty)| self.value(ty, depth - 1, rng)).collect();
                    format!("'{{{}}}", values.join(", "))
                }
                _ => self.expression(depth, rng),
            },
            Type::Packed { outer, .. } if rng.u32(..3) == 0 => {
                let values: Vec<String> = (0..*outer).map(|_| self.expression(1, rng)).collect();
                format!("'{{{}}}", values.join(", "))
            }
            _ => self.expression(depth, rng),
        }
    }

    /// Any expression that has bits.
    pub fn expression(&self, depth: usize, rng: &mut Rng) -> String {
        if depth == 0 || rng.u32(..6) == 0 {
            return self.leaf(rng);
        }
        let a = self.expression(depth - 1, rng);
        let mut next = || self.expression(depth - 1, rng);
        let (b, c) = (next(), next());
        match rng.u32(..17) {
            0..=4 => {
                let operators = [
                    "+", "-", "&", "|", "^", "~^", "&&", "||", "==", "!=", "<", ">=", "<<", ">>", ">>>", "*", "==?",
                    "->",
                ];
                format!("({a} {} {b})", operators[rng.usize(..operators.len())])
            }
            5 | 6 => format!("({}{a})", ["~", "-", "!", "&", "|", "^", "~|", "+"][rng.usize(..8)]),
            7..=9 => format!("({a} ? {b} : {c})"),
            10 => {
                let (a, b) = (self.leaf_with_width(rng), self.leaf_with_width(rng));
                format!("{{{a}, {b}}}")
            }
            11 => format!("{{{}{{{}}}}}", rng.u32(1..4), self.leaf_with_width(rng)),
            12 => {
                let calls =
                    ["$signed", "$unsigned", "$countones", "$onehot", "$onehot0", "$bits", "signed'", "unsigned'"];
                format!("{}({})", calls[rng.usize(..calls.len())], self.leaf_with_width(rng))
            }
            13 => format!("({a} inside {{{}, [1:{}]}})", rng.u32(..9), rng.u32(1..9)),
            14 => format!("{}'({a})", rng.u32(1..20)),
            15 => match rng.choice(&self.functions) {
                Some(function) => {
                    let arguments: Vec<String> =
                        function.arguments.iter().map(|argument| self.value(argument, 1.min(depth - 1), rng)).collect();
                    format!("{}({})", function.name, arguments.join(", "))
                }
                None => a,
            },
            _ => format!("{{<<{{{}}}}}", self.leaf_with_width(rng)),
        }
    }

    fn leaf(&self, rng: &mut Rng) -> String {
        match rng.u32(..8) {
            0 => rng.u32(..9).to_string(),
            1 => rng.choice(&self.constants).cloned().unwrap_or("1".to_string()),
            2 => ["'0", "'1", "1'b1", "4'hf", "8'd200", "3'sd2", "'h3", "2'b0x"][rng.usize(..8)].to_string(),
            _ => self.leaf_with_width(rng),
        }
    }

    /// Something of a width of its own, as concatenations need.
    fn leaf_with_width(&self, rng: &mut Rng) -> String {
        match rng.choice(&self.variables) {
            Some(variable) => variable.part(self, rng),
            None => format!("4'd{}", rng.u32(..16)),
        }
    }
}
