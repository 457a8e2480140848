//! Statements of the grammar.

use fastrand::Rng;

use crate::expressions::{Scope, Type, Variable};

/// What a process may assign.
pub struct Target {
    pub variable: Variable,
    /// `=` or `<=`.
    pub operator: &'static str,
    /// Whether loops may be used around it.
    pub loops: bool,
}

impl Scope {
    /// One statement that assigns some of `targets`, indented by `indent`.
    pub fn statement(&self, targets: &[&Target], depth: usize, indent: usize, rng: &mut Rng) -> String {
        let blanks = " ".repeat(indent);
        if depth == 0 {
            return self.assignment(targets, &blanks, rng);
        }
        let mut inner = |scope: &Self| scope.statement(targets, depth - 1, indent + 2, rng);
        let (a, b) = (inner(self), inner(self));
        match rng.u32(..12) {
            0 | 1 => format!("{blanks}if ({}) begin\n{a}{blanks}end\n", self.expression(2, rng)),
            2 | 3 => {
                let check = ["", "unique ", "priority "][rng.usize(..3)];
                let condition = self.expression(2, rng);
                format!("{blanks}{check}if ({condition}) begin\n{a}{blanks}end else begin\n{b}{blanks}end\n")
            }
            4 | 5 => self.case(&a, &b, &blanks, rng),
            6 if targets.iter().all(|target| target.loops) => self.counting_loop(targets, depth, indent, rng),
            7 => format!("{blanks}begin : blk{}\n{a}{b}{blanks}end\n", rng.u32(..1000)),
            8 => format!(
                "{blanks}begin\n{blanks}  automatic logic [7:0] t = {};\n{a}{blanks}end\n",
                self.expression(2, rng)
            ),
            _ => self.assignment(targets, &blanks, rng),
        }
    }

    fn case(&self, a: &str, b: &str, blanks: &str, rng: &mut Rng) -> String {
        let selector = self.expression(1, rng);
        let (word, labels) = match rng.u32(..5) {
            0 => ("casez", ["4'b1??0", "4'b01??"]),
            1 => ("casex", ["4'b1x?0", "4'bx1??"]),
            2 => ("unique case", ["0, 1", "2"]),
            _ => ("case", ["0", "3, 1"]),
        };
        let (inside, labels) =
            if word == "case" && rng.bool() { (" inside", ["[0:2]", "3, [5:6]"]) } else { ("", labels) };
        format!(
            "{blanks}{word} ({selector}){inside}\n{blanks}  {}: begin\n{a}{blanks}  end\n{blanks}  {}: begin\n{b}{blanks}  \
             end\n{blanks}  default: ;\n{blanks}endcase\n",
            labels[0], labels[1]
        )
    }

    fn counting_loop(&self, targets: &[&Target], depth: usize, indent: usize, rng: &mut Rng) -> String {
        let blanks = " ".repeat(indent);
        let index = format!("k{depth}");
        let mut inner = self.clone();
        inner.variables.push(Variable::plain(&index, Type::vector("int", 32)));
        let body = inner.statement(targets, depth - 1, indent + 2, rng);
        let leave = match rng.u32(..3) {
            0 => format!("if ({index} == 2) break;\n"),
            1 => format!("if ({index} == 1) continue;\n"),
            _ => String::new(),
        };
        let end = rng.u32(1..5);
        format!("{blanks}for (int {index} = 0; {index} < {end}; {index}++) begin\n{blanks}  {leave}{body}{blanks}end\n")
    }

    fn assignment(&self, targets: &[&Target], blanks: &str, rng: &mut Rng) -> String {
        let target = targets[rng.usize(..targets.len())];
        let (variable, operator) = (&target.variable, target.operator);
        if rng.bool() {
            let value = variable.whole_value(self, 2, rng);
            return format!("{blanks}{} {operator} {value};\n", variable.name);
        }
        let is_plain = matches!(variable.ty, Type::Vector { .. } | Type::Packed { .. });
        if !is_plain {
            return format!("{blanks}{}\n", self.member_assignment(variable, operator, rng));
        }
        let operator = match (operator, rng.u32(..6)) {
            ("=", 0) => "+=",
            ("=", 1) => "^=",
            ("=", 2) => "<<=",
            (other, _) => other,
        };
        format!("{blanks}{} {operator} {};\n", variable.part(self, rng), self.expression(2, rng))
    }

    /// Members of enumeration type need a value of that type.
    fn member_assignment(&self, variable: &Variable, operator: &str, rng: &mut Rng) -> String {
        let mut text = variable.name.clone();
        for &size in &variable.unpacked {
            text += &format!("[{}]", self.index(size, rng));
        }
        let mut ty = &variable.ty;
        while let Type::Struct { fields, .. } = ty {
            let (field, inner) = &fields[rng.usize(..fields.len())];
            text += &format!(".{field}");
            ty = inner;
        }
        format!("{text} {operator} {};", self.value(ty, 2, rng))
    }
}
