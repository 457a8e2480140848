//! `case` statements. Constant labels that exclude each other make one AND-OR level, whose missing default drops out
//! when the labels cover every value; everything else nests selectors in the order of the arms.

use std::collections::{BTreeMap, HashSet};

use super::bits::Bit;
use super::context::{Elaborator, Outcome};
use super::statement::{Exits, head};
use crate::graph::Site;
use crate::syntax::ast::{Case, CaseKind, ExprKind, Stmt, Unique};

/// What a constant label demands of each bit of the subject that can change: `None` does not care.
type Cube = Vec<Option<bool>>;

fn has_attribute(statement: &Stmt, name: &str) -> bool {
    statement.attributes.iter().any(|attribute| attribute.name.name == name)
}

impl<'a> Elaborator<'a> {
    pub fn execute_case(&mut self, statement: &'a Stmt, case: &'a Case) -> Outcome<Exits> {
        let site = self.site(head(statement.span, case.subject.span));
        let full = case.default.is_none()
            && (matches!(case.unique, Some(Unique::Unique | Unique::Priority))
                || has_attribute(statement, "full_case"));
        let (mut width, mut signed) = self.size(&case.subject)?;
        for label in case.arms.iter().flat_map(|arm| &arm.labels) {
            if !matches!(label.kind, ExprKind::Range(..)) {
                let (label_width, label_signed) = self.size(label)?;
                width = width.max(label_width);
                signed &= label_signed;
            }
        }
        let subject = self.eval(&case.subject, width, signed)?;
        let mut cubes: Option<Vec<Vec<Cube>>> = Some(Vec::new());
        let mut conditions = Vec::new();
        for arm in &case.arms {
            let mut matches = Vec::new();
            let mut arm_cubes = Some(Vec::new());
            for label in &arm.labels {
                let label_site = self.site(label.span);
                if matches!(label.kind, ExprKind::Range(..)) {
                    matches.push(self.matches_label(&case.subject, width, signed, label)?);
                    arm_cubes = None;
                    continue;
                }
                let bits = self.eval(label, width, signed)?;
                matches.push(self.match_label(&subject, &bits, case.kind, label_site));
                match (label_cube(&subject, &bits, case.kind), &mut arm_cubes) {
                    (Label::Cube(cube), Some(cubes)) => cubes.push(cube),
                    (Label::Never, _) => {}
                    _ => arm_cubes = None,
                }
            }
            let arm_site = self.site(arm.span);
            conditions.push(if let [one] = matches.as_slice() { *one } else { self.or(&matches, arm_site) });
            match (arm_cubes, &mut cubes) {
                (Some(arm_cubes), Some(cubes)) => cubes.push(arm_cubes),
                _ => cubes = None,
            }
        }
        let exclusive = cubes.filter(|cubes| !subject.iter().all(|bit| bit.is_literal()) && disjoint(cubes));
        if let Some(cubes) = exclusive {
            let covered = covers_all(&cubes);
            return self.execute_exclusive(case, &conditions, covered, full, site);
        }
        self.execute_priority(case, &conditions, full, site)
    }

    /// One AND-OR level over all arms.
    fn execute_exclusive(
        &mut self,
        case: &'a Case,
        conditions: &[Bit],
        covered: bool,
        full: bool,
        site: Site,
    ) -> Outcome<Exits> {
        let mut conditions = conditions.to_vec();
        let mut layers = Vec::new();
        let mut exits = Vec::new();
        for arm in &case.arms {
            self.environment.push();
            exits.push(self.execute(&arm.body)?);
            layers.push(self.environment.pop());
        }
        if !covered {
            let any = self.or(&conditions, site);
            conditions.push(self.not(any, site));
            self.environment.push();
            exits.push(match &case.default {
                Some(default) => self.execute(default)?,
                None => Exits::new(),
            });
            layers.push(self.environment.pop());
        }
        self.merge_exclusive(&conditions, &layers, full && !covered, site);
        let targets: Vec<usize> = exits.iter().flat_map(|exits| exits.keys().copied()).collect();
        let mut joined = Exits::new();
        for target in targets {
            let terms: Vec<(Bit, Bit)> = conditions
                .iter()
                .zip(&exits)
                .map(|(&condition, exits)| (condition, exits.get(&target).copied().unwrap_or(Bit::Zero)))
                .collect();
            let exit = self.choose(&terms, site);
            joined.insert(target, exit);
        }
        Ok(joined)
    }

    /// Selectors nested in the order of the arms.
    fn execute_priority(&mut self, case: &'a Case, conditions: &[Bit], full: bool, site: Site) -> Outcome<Exits> {
        let mut branches = Vec::new();
        let mut decided = false;
        for (arm, &condition) in case.arms.iter().zip(conditions) {
            let condition = self.assume(condition);
            if matches!(condition, Bit::Zero | Bit::X | Bit::Z) {
                continue;
            }
            self.environment.push();
            let exits = self.execute(&arm.body)?;
            branches.push((condition, exits, self.environment.pop()));
            if condition == Bit::One {
                decided = true;
                break;
            }
        }
        self.environment.push();
        let mut exits = match &case.default {
            Some(default) if !decided => self.execute(default)?,
            _ => Exits::new(),
        };
        let mut rest = self.environment.pop();
        let full = full && !decided;
        for (condition, then_exits, layer) in branches.into_iter().rev() {
            self.environment.push();
            self.merge(condition, layer, rest, full, site);
            rest = self.environment.pop();
            exits = self.join_exits(condition, then_exits, exits, site);
        }
        for (key, bits) in rest {
            self.environment.set(key, bits);
        }
        Ok(exits)
    }

    fn match_label(&mut self, subject: &[Bit], label: &[Bit], kind: CaseKind, site: Site) -> Bit {
        let ignores = |bit: Bit| match kind {
            CaseKind::Case => false,
            CaseKind::Casez => bit == Bit::Z,
            CaseKind::Casex => matches!(bit, Bit::X | Bit::Z),
            CaseKind::Inside => false,
        };
        let mut terms = Vec::with_capacity(label.len());
        for (&value, &label) in subject.iter().zip(label) {
            if ignores(label) || ignores(value) || kind == CaseKind::Inside && matches!(label, Bit::X | Bit::Z) {
                continue;
            }
            match (value.logic(), label.logic()) {
                (Some(value), Some(label)) if value == label => {}
                (_, Some(super::value::Logic::X | super::value::Logic::Z)) | (Some(_), Some(_)) => return Bit::Zero,
                _ => terms.push(self.gate(crate::graph::GateKind::Xnor, &[value, label], site)),
            }
        }
        self.and(&terms, site)
    }
}

enum Label {
    Cube(Cube),
    /// A label with x or z that an exact comparison never meets.
    Never,
    Variable,
}

/// The label as a cube over the distinct nodes of the subject. Bits that the subject was extended by are literal, or
/// repeat its sign.
fn label_cube(subject: &[Bit], label: &[Bit], kind: CaseKind) -> Label {
    let mut demands: BTreeMap<Bit, Option<bool>> = BTreeMap::new();
    for (&value, bit) in subject.iter().zip(label) {
        let demand = match (bit, kind) {
            (Bit::Zero, _) => Some(false),
            (Bit::One, _) => Some(true),
            (Bit::Z, CaseKind::Casez | CaseKind::Casex | CaseKind::Inside) => None,
            (Bit::X, CaseKind::Casex | CaseKind::Inside) => None,
            (Bit::X | Bit::Z, _) => return Label::Never,
            _ => return Label::Variable,
        };
        match (value, demand) {
            (Bit::Zero, Some(true)) | (Bit::One, Some(false)) => return Label::Never,
            (Bit::Zero | Bit::One, _) => {}
            (Bit::X | Bit::Z, _) => return Label::Variable,
            (value, demand) => match demands.entry(value).or_insert(demand) {
                Some(before) if demand.is_some_and(|demand| demand != *before) => return Label::Never,
                Some(_) => {}
                slot => *slot = demand,
            },
        }
    }
    Label::Cube(demands.into_values().collect())
}

/// Whether labels of different arms never match together.
fn disjoint(arms: &[Vec<Cube>]) -> bool {
    if arms.iter().flatten().flatten().all(Option::is_some) {
        let mut owners: BTreeMap<&Cube, usize> = BTreeMap::new();
        return arms
            .iter()
            .enumerate()
            .all(|(arm, cubes)| cubes.iter().all(|cube| *owners.entry(cube).or_insert(arm) == arm));
    }
    let apart = |a: &Cube, b: &Cube| a.iter().zip(b).any(|(a, b)| matches!((a, b), (Some(a), Some(b)) if a != b));
    arms.iter()
        .enumerate()
        .all(|(index, arm)| arms[index + 1..].iter().flatten().all(|other| arm.iter().all(|cube| apart(cube, other))))
}

/// Whether the labels together match every value of the subject: by counting, when they are disjoint.
fn covers_all(arms: &[Vec<Cube>]) -> bool {
    let width = arms.iter().flatten().next().map_or(64, Vec::len);
    if width >= 64 {
        return false;
    }
    let cubes: HashSet<&Cube> = arms.iter().flatten().collect();
    let cubes: Vec<&Cube> = cubes.into_iter().collect();
    let apart = |a: &Cube, b: &Cube| a.iter().zip(b).any(|(a, b)| matches!((a, b), (Some(a), Some(b)) if a != b));
    let exact = cubes.iter().all(|cube| cube.iter().all(Option::is_some));
    if !exact && cubes.iter().enumerate().any(|(at, a)| cubes[at + 1..].iter().any(|b| !apart(a, b))) {
        return false;
    }
    let total: u128 = cubes.iter().map(|cube| 1u128 << cube.iter().filter(|bit| bit.is_none()).count()).sum();
    total == 1u128 << width
}
