//! Which places of the sources carry an attribute that asks a synthesiser to leave them alone. The syntax is that of IEEE
//! 1364-2005 clause 3.8; the names are those that are common practice in the trade: `keep`, `dont_touch`, `preserve`.
//! On a declaration the attribute keeps the declared nets, not the logic in their initialisers; on an instance, a
//! primitive gate or a module it keeps all that is inside.

use super::ast::{Attribute, Attributes, ExprKind, Item, ItemKind, Module, Ports, Unit};
use crate::source::Span;

/// Common names, in lower case; they are compared without regard to case.
const NAMES: [&str; 3] = ["keep", "dont_touch", "preserve"];

/// See the module documentation.
#[derive(Clone, PartialEq, Eq, Debug, Default)]
pub struct Protection {
    /// Declarations with the name of the attribute; sorted.
    declarations: Vec<(Span, String)>,
    /// Instances and modules; sorted.
    bodies: Vec<(Span, String)>,
}

impl Protection {
    pub fn collect(units: &[Unit]) -> Self {
        let mut protection = Self::default();
        for unit in units {
            for module in &unit.modules {
                protection.module(module);
            }
        }
        protection.declarations.sort();
        protection.bodies.sort();
        protection
    }

    /// The attribute on the declaration of the net whose name stands at `place`.
    pub fn of_net(&self, place: Span) -> Option<&str> {
        around(&self.declarations, place)
    }

    /// The attribute on an instance, gate or module around `place`.
    pub fn around(&self, place: Span) -> Option<&str> {
        around(&self.bodies, place)
    }

    fn module(&mut self, module: &Module) {
        self.bodies.extend(protecting(&module.attributes).map(|name| (module.span, name)));
        if let Ports::Ansi(ports) = &module.ports {
            for port in ports {
                let name = protecting(&port.attributes);
                self.declarations.extend(name.map(|name| (port.span.to(port.name.span), name)));
            }
        }
        self.items(&module.items);
    }

    fn items(&mut self, items: &[Item]) {
        for item in items {
            let found = protecting(&item.attributes).map(|name| (item.span, name));
            match &item.kind {
                ItemKind::Net { .. } | ItemKind::Var { .. } | ItemKind::PortDecl { .. } => {
                    self.declarations.extend(found);
                }
                ItemKind::Instances { .. } | ItemKind::Gates { .. } => self.bodies.extend(found),
                ItemKind::GenBlock(block) => self.items(&block.items),
                ItemKind::GenFor { body, .. } => self.items(&body.items),
                ItemKind::GenIf { then, otherwise, .. } => {
                    for block in std::iter::once(then).chain(otherwise) {
                        self.items(&block.items);
                    }
                }
                ItemKind::GenCase { arms, default, .. } => {
                    for block in arms.iter().map(|(_, block)| block).chain(default) {
                        self.items(&block.items);
                    }
                }
                ItemKind::Module(module) => self.module(module),
                _ => {}
            }
        }
    }
}

fn around(places: &[(Span, String)], place: Span) -> Option<&str> {
    let inside = |outer: &Span| outer.file == place.file && outer.start <= place.start && place.end <= outer.end;
    places.iter().find(|(outer, _)| inside(outer)).map(|(_, name)| name.as_str())
}

fn protecting(attributes: &Attributes) -> Option<String> {
    attributes.iter().find(|attribute| protects(attribute)).map(|attribute| attribute.name.name.clone())
}

/// A known name whose value is not "no".
fn protects(attribute: &Attribute) -> bool {
    let name = attribute.name.name.to_ascii_lowercase();
    let refused = match attribute.value.as_ref().map(|value| &value.kind) {
        Some(ExprKind::Number(literal)) => literal.bits.chars().all(|bit| bit == '0'),
        Some(ExprKind::String(text)) => matches!(text.to_ascii_lowercase().as_str(), "false" | "no" | "0"),
        _ => false,
    };
    NAMES.contains(&name.as_str()) && !refused
}
