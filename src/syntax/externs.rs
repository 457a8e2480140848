//! `module m (.*);` takes its ports, parameters and imports from `extern module m ...;` (IEEE 1800-2017 clause 23.5). The
//! two may stand in different parts of a file that are converted apart, so they are joined when the file is whole.

use super::ast::{Ports, Unit};

/// Completes the modules of a file from its extern declarations.
pub fn resolve(unit: &mut Unit) {
    let Unit { modules, externs, .. } = unit;
    for module in modules.iter_mut().filter(|module| matches!(module.ports, Ports::Wildcard)) {
        if let Some(known) = externs.iter().find(|known| known.name.name == module.name.name) {
            module.imports.clone_from(&known.imports);
            module.params.clone_from(&known.params);
            module.ports = known.ports.clone();
        }
    }
}
