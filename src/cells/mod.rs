//! What is known about modules beyond their text: declarations of the settings file about pins, glitch-free selectors and
//! clock gates, and the cells of Liberty libraries. Elaboration asks here about each instance.
//!
//! Invariant: what a declaration says is never guessed further. A pin that an instance does not have is reported, and a
//! cell whose behaviour is not understood stays a module without text.

mod declared;
mod function;
mod liberty;
mod library;
mod model;

use std::collections::BTreeMap;
use std::path::PathBuf;

use crate::input::{Input, InputRole};
use crate::source::PathError;

pub use declared::{Declaration, DeclaredPin, PinName, PinRole, Role};
pub use function::Function;
pub use library::{Known, read_library};
pub use model::{Both, Direction, Model, Output, Pin, State, StateKind};

/// All that is known, by name of module.
#[derive(Clone, Default, Debug)]
pub struct Cells {
    /// Declared selectors and clock gates; they stand for their modules even where there is a text.
    declared: BTreeMap<String, Model>,
    /// Declared pins of modules without text.
    pins: BTreeMap<String, Declaration>,
    libraries: BTreeMap<String, Known>,
    /// The files of the libraries.
    pub inputs: Vec<Input>,
}

impl Cells {
    /// Reads the libraries and puts the declarations beside them.
    ///
    /// # Errors
    /// A library that cannot be read or is no Liberty; a module that is declared twice.
    pub fn new(libraries: &[PathBuf], declarations: &[Declaration]) -> Result<Cells, PathError> {
        let mut cells = Cells::default();
        for path in libraries {
            let bytes = std::fs::read(path).map_err(|error| {
                let message = format!("the library `{}` cannot be read: {error}", path.display());
                PathError::new(message, "check the path")
            })?;
            cells.inputs.push(Input::read(InputRole::Library, path, &bytes));
            for (name, known) in read_library(&String::from_utf8_lossy(&bytes), path)? {
                cells.libraries.entry(name).or_insert(known);
            }
        }
        for declaration in declarations {
            for name in &declaration.modules {
                let fresh = match Model::declared(declaration, name) {
                    Some(model) => cells.declared.insert(name.clone(), model).is_none(),
                    None => cells.pins.insert(name.clone(), declaration.clone()).is_none(),
                };
                if !fresh || (cells.declared.contains_key(name) && cells.pins.contains_key(name)) {
                    let place = format!("{}:{}", declaration.file, declaration.line);
                    let message = format!("{place}: the cell `{name}` is declared twice");
                    return Err(PathError::new(message, "leave one of the declarations"));
                }
            }
        }
        Ok(cells)
    }

    /// A selector or clock gate that stands for the module, whatever its text says.
    pub fn declared(&self, module: &str) -> Option<&Model> {
        self.declared.get(module)
    }

    /// The declared pins of a module without text.
    pub fn pins(&self, module: &str) -> Option<&Declaration> {
        self.pins.get(module)
    }

    /// What the libraries say about a module without text.
    pub fn library(&self, module: &str) -> Option<&Known> {
        self.libraries.get(module)
    }

    /// The names of all declared modules with the place of their declaration.
    pub fn all_declared(&self) -> impl Iterator<Item = (&str, String)> {
        let models = self.declared.iter().map(|(name, model)| (name.as_str(), model.place.clone()));
        let pins = self.pins.iter();
        models.chain(pins.map(|(name, declared)| (name.as_str(), format!("{}:{}", declared.file, declared.line))))
    }
}
