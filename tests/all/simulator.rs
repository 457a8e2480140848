//! Equivalence with an independent simulator.

use std::process::Command;

/// A small reproducible generator (xorshift).
pub struct Random(u64);

impl Random {
    pub fn new(seed: u64) -> Self {
        Self(seed.wrapping_mul(0x9e37_79b9_7f4a_7c15) | 1)
    }

    pub fn next(&mut self) -> u64 {
        self.0 ^= self.0 << 13;
        self.0 ^= self.0 >> 7;
        self.0 ^= self.0 << 17;
        self.0
    }

    pub fn below(&mut self, bound: usize) -> usize {
        (self.next() >> 33) as usize % bound
    }
}

/// Compiles and runs one Verilog source; the lines it prints.
#[track_caller]
pub fn display_lines(source: &str) -> Vec<String> {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let (input, program) = (folder.path().join("t.v"), folder.path().join("t.vvp"));
    std::fs::write(&input, source).expect("written");
    let compiled =
        Command::new("iverilog").arg("-g2012").arg("-o").arg(&program).arg(&input).output().expect("iverilog runs");
    assert!(compiled.status.success(), "iverilog: {}", String::from_utf8_lossy(&compiled.stderr));
    let run = Command::new("vvp").arg("-n").arg(&program).output().expect("vvp runs");
    assert!(run.status.success(), "vvp: {}", String::from_utf8_lossy(&run.stderr));
    String::from_utf8_lossy(&run.stdout).lines().map(str::to_string).collect()
}
