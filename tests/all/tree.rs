//! A folder with the files of a small project, and the program as a user runs it there.

use std::path::PathBuf;
use std::process::{Command, Output};

use serde_json::Value;

/// A folder with files, which goes away with the value.
pub struct Tree(tempfile::TempDir);

impl Tree {
    #[track_caller]
    pub fn new(files: &[(&str, &str)]) -> Tree {
        let tree = Tree(tempfile::tempdir().expect("a temporary folder"));
        for (name, text) in files {
            tree.write(name, text.as_bytes());
        }
        tree
    }

    #[track_caller]
    pub fn write(&self, name: &str, bytes: &[u8]) {
        let path = self.path(name);
        std::fs::create_dir_all(path.parent().expect("a parent")).expect("folders");
        std::fs::write(path, bytes).expect("a file");
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.0.path().join(name)
    }

    /// Runs the program in the folder.
    pub fn run(&self, arguments: &[&str]) -> Output {
        let output = Command::new(env!("CARGO_BIN_EXE_stillwire")).args(arguments).current_dir(self.path("")).output();
        output.expect("the program starts")
    }

    /// What the program says; it must end with `code`.
    #[track_caller]
    pub fn ends(&self, code: i32, arguments: &[&str]) -> String {
        let output = self.run(arguments);
        let text = String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr);
        assert_eq!(output.status.code(), Some(code), "{arguments:?}\n{text}");
        text
    }

    pub fn json(&self, arguments: &[&str]) -> Value {
        let output = self.run(&[arguments, &["--write", "json:-"]].concat());
        crate::outputs::kept("json", &output.stdout).expect("JSON")
    }

    pub fn read(&self, name: &str) -> String {
        std::fs::read_to_string(self.path(name)).expect("readable")
    }
}
