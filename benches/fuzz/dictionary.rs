//! What mutations put in: numbers at the borders of something, operators, words of the language, and pieces of text.

use std::sync::LazyLock;

/// Lists of words, split once.
pub struct Dictionary {
    pub numbers: Vec<&'static str>,
    pub operators: Vec<&'static str>,
    pub words: Vec<&'static str>,
    /// Directives end their line.
    pub snippets: Vec<String>,
}

pub static DICTIONARY: LazyLock<Dictionary> = LazyLock::new(|| {
    let line = |line: &str| if line.starts_with(['`', '/']) { format!("{line}\n") } else { line.to_string() };
    Dictionary {
        numbers: NUMBERS.split_whitespace().collect(),
        operators: OPERATORS.split_whitespace().collect(),
        words: WORDS.split_whitespace().collect(),
        snippets: include_str!("snippets.txt").lines().map(line).collect(),
    }
});

/// Widths, powers of two and their neighbours, and odd forms.
const NUMBERS: &str = "\
    0 1 -1 2 3 8 31 32 33 63 64 65 1023 65535 65536 65537 1000000 2147483647 2147483648 -2147483648 4294967295 \
    4294967296 9223372036854775807 18446744073709551616 99999999999999999999999999 '0 '1 'x 'z 1'bx 4'b1?z0 0'b0 \
    1'h123456789 128'hffffffffffffffffffffffffffffffff 64'sh8000000000000000 32'sd-1 8'dx 1.5 1e9 1e400 10ns \
    99999999999'd1 65536'h1 1_000 'h 8'hzz 'sd5 16'o7_7";

/// Operators and what looks like one.
const OPERATORS: &str = "\
    + - * / % ** & | ^ ~^ && || == != === !== ==? !=? < <= > >= << >> <<< >>> -> <-> ~ ! ++ -- += <<= ? : :: . '";

/// Keywords and system functions.
const WORDS: &str = "\
    module endmodule begin end if else case casez endcase for foreach while repeat forever do generate \
    endgenerate genvar function endfunction task endtask always always_ff always_comb always_latch initial final \
    assign deassign force wire logic reg bit int integer byte shortint longint time real string event void \
    chandle tri wand wor supply0 uwire signed unsigned input output inout ref const static automatic parameter \
    localparam defparam type typedef struct union packed tagged enum interface endinterface modport package \
    endpackage import export class endclass extends virtual program endprogram primitive endprimitive table \
    endtable posedge negedge edge or and not buf nand xor bufif0 tran pullup unique unique0 priority inside with \
    matches default return break continue disable wait fork join assert assume cover property sequence bind let \
    iff this null new clocking endclocking covergroup endgroup specify endspecify checker endchecker config \
    endconfig extern timeunit nettype alias $clog2 $bits $size $left $right $low $high $increment $dimensions \
    $signed $unsigned $countones $onehot $onehot0 $isunknown $unit $root $display $fatal $error $readmemh \
    $random $time $typename $unpacked_dimensions $bitstoreal $rtoi $itor $cast $past $nosuch";
