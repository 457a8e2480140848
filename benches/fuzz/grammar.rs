//! Random designs of SystemVerilog: packages, an interface, modules that instantiate each other, with parameters, types,
//! generate constructs, functions and processes. Nearly all are legal, so that they reach the depth of elaboration; the
//! run prints how many were read complete.

use fastrand::Rng;

use crate::expressions::{Function, Scope, Type, Variable};
use crate::statements::Target;

/// A module that later ones can instantiate.
struct Module {
    name: String,
    /// The names of its value parameters.
    parameters: Vec<String>,
    /// Whether it has a parameter `T` that is a type.
    has_type: bool,
    /// Direction and variable, clock and reset left out.
    ports: Vec<(bool, Variable)>,
    /// Name of its one interface port.
    bus: Option<String>,
}

/// The text of one design.
pub fn design(rng: &mut Rng) -> String {
    let mut text = String::new();
    let mut global = Scope::default();
    let packages = rng.usize(..3);
    for index in 0..packages {
        text += &package(&format!("pkg{index}"), &mut global, rng);
    }
    let has_bus = rng.bool();
    if has_bus {
        text += &interface(&mut global, rng);
    }
    let mut modules = Vec::new();
    for index in 0..rng.usize(1..4) {
        text += &module(index, has_bus, &global, &mut modules, rng);
    }
    text
}

fn package(name: &str, global: &mut Scope, rng: &mut Rng) -> String {
    let mut own = Scope { types: global.types.clone(), constants: global.constants.clone(), ..Scope::default() };
    let before = own.types.len();
    let mut text = format!("package {name};\n");
    for index in 0..rng.usize(1..4) {
        let constant = format!("{}_C{index}", name.to_uppercase());
        text += &match rng.u32(..3) {
            0 => format!("  localparam int {constant} = {};\n", rng.u32(1..9)),
            1 => format!("  parameter logic [7:0] {constant} = 8'h{:x};\n", rng.u8(1..)),
            _ => format!("  localparam {constant} = $clog2({});\n", rng.u32(2..90)),
        };
        own.constants.push(constant.clone());
        global.constants.push(format!("{name}::{constant}"));
    }
    for index in 0..rng.usize(1..5) {
        text += &own.typedef(&format!("{name}_t{index}"), rng);
    }
    for ty in &own.types[before..] {
        global.types.push(ty.within(name));
    }
    for index in 0..rng.usize(..3) {
        let (declaration, function) = function(&format!("{name}_f{index}"), &own, rng);
        text += &declaration;
        own.functions.push(function.clone());
        global.functions.push(Function { name: format!("{name}::{}", function.name), ..function });
    }
    text + "endpackage\n\n"
}

fn interface(global: &mut Scope, rng: &mut Rng) -> String {
    let ty = global.some_type(rng);
    format!(
        "interface bus_if #(parameter int W = {}) (input logic clk);\n  logic [W-1:0] data;\n  logic valid, ready;\n  \
         {} meta;\n  modport source(output data, valid, meta, input ready, clk);\n  modport sink(input data, valid, meta, \
         clk, output ready);\n  wire both = valid & ready;\nendinterface\n\n",
        rng.u32(1..9),
        ty.text()
    )
}

/// A function and how to call it.
fn function(name: &str, around: &Scope, rng: &mut Rng) -> (String, Function) {
    let mut inner = Scope { variables: Vec::new(), ..around.clone() };
    let result = around.some_type(rng);
    let arguments: Vec<Variable> =
        (0..rng.usize(1..4)).map(|index| Variable::plain(&format!("a{index}"), around.some_type(rng))).collect();
    inner.variables.extend(arguments.clone());
    let local = Variable::plain("v", around.some_type(rng));
    let list: Vec<String> = arguments.iter().map(|argument| format!("input {}", argument.declaration())).collect();
    let mut text = format!("  function automatic {} {name}({});\n", result.text(), list.join(", "));
    text += &format!("    {};\n    v = {};\n", local.declaration(), inner.value(&local.ty, 2, rng));
    inner.variables.push(local.clone());
    let target = Target { variable: local, operator: "=", loops: true };
    for _ in 0..rng.usize(..3) {
        text += &inner.statement(&[&target], 2, 4, rng);
    }
    text += &format!("    return {};\n  endfunction\n", inner.value(&result, 2, rng));
    let arguments = arguments.into_iter().map(|argument| argument.ty).collect();
    (text, Function { name: name.to_string(), arguments })
}

fn module(index: usize, has_bus: bool, global: &Scope, modules: &mut Vec<Module>, rng: &mut Rng) -> String {
    let name = format!("m{index}");
    let mut scope = global.clone();
    let mut parameters = Vec::new();
    let mut list = Vec::new();
    for index in 0..rng.usize(..3) {
        let parameter = format!("P{index}");
        list.push(format!("parameter int {parameter} = {}", rng.u32(1..9)));
        parameters.push(parameter.clone());
        scope.constants.push(parameter);
    }
    let has_type = rng.u32(..4) == 0;
    if has_type {
        list.push("parameter type T = logic [3:0]".to_string());
        scope.types.push(Type::vector("T", 4));
    }
    let head = if list.is_empty() { String::new() } else { format!(" #({})", list.join(", ")) };

    let mut ports = vec!["input logic clk".to_string(), "input logic rst_n".to_string()];
    let bus = (has_bus && rng.bool()).then(|| "bus".to_string());
    ports.extend(bus.iter().map(|bus| format!("bus_if.sink {bus}")));
    let mut own = Vec::new();
    for index in 0..rng.usize(1..4) {
        own.push((false, Variable::any(&format!("i{index}"), &scope, rng)));
    }
    for index in 0..rng.usize(1..4) {
        own.push((true, Variable::any(&format!("o{index}"), &scope, rng)));
    }
    for (is_output, variable) in &own {
        ports.push(format!("{} {}", if *is_output { "output" } else { "input" }, variable.declaration()));
    }
    scope.variables.extend(own.iter().filter(|(is_output, _)| !is_output).map(|(_, variable)| variable.clone()));
    if let Some(bus) = &bus {
        scope.variables.push(Variable::plain(&format!("{bus}.data"), Type::vector("logic", 1)));
        scope.variables.push(Variable::plain(&format!("{bus}.valid"), Type::vector("logic", 1)));
    }

    let mut body = String::new();
    for index in 0..rng.usize(..3) {
        body += &scope.typedef(&format!("{name}_t{index}"), rng);
    }
    if rng.bool() {
        let (text, function) = function(&format!("{name}_f"), &scope, rng);
        body += &text;
        scope.functions.push(function);
    }
    for index in 0..rng.usize(1..6) {
        body += &item(&format!("v{index}"), &mut scope, rng);
    }
    for index in 0..rng.usize(..3) {
        if !modules.is_empty() {
            let module = &modules[rng.usize(..modules.len())];
            body += &instance(&format!("u{index}"), module, &mut scope, rng);
        }
    }
    for (_, variable) in own.iter().filter(|(is_output, _)| *is_output) {
        body += &drive(variable, &scope, rng);
    }
    if let Some(bus) = &bus {
        body += &format!("  assign {bus}.ready = {};\n", scope.expression(2, rng));
    }
    body += for_simulation(&scope, rng).as_str();
    modules.push(Module { name: name.clone(), parameters, has_type, ports: own, bus });
    format!("module {name}{head} (\n  {}\n);\n{body}endmodule\n\n", ports.join(",\n  "))
}

/// Declares a variable and drives it, perhaps inside a generate block.
fn item(name: &str, scope: &mut Scope, rng: &mut Rng) -> String {
    match rng.u32(..8) {
        0 => {
            let count = rng.usize(1..5);
            let element = scope.some_type(rng);
            let value = scope.value(&element, 2, rng);
            let variable = Variable { name: name.to_string(), ty: element, unpacked: vec![count] };
            let text = format!(
                "  {};\n  for (genvar g = 0; g < {count}; g++) begin : gen_{name}\n    assign {name}[g] = {value};\n  end\n",
                variable.declaration()
            );
            scope.variables.push(variable);
            text
        }
        1 => {
            let variable = Variable::plain(name, scope.some_type(rng));
            let (condition, yes, no) =
                (scope.constant(2, rng), scope.value(&variable.ty, 2, rng), scope.value(&variable.ty, 2, rng));
            let text = format!(
                "  {};\n  if ({condition}) begin : gen_{name}\n    assign {name} = {yes};\n  end else begin : gen_{name}\n    \
                 assign {name} = {no};\n  end\n",
                variable.declaration()
            );
            scope.variables.push(variable);
            text
        }
        2 => {
            let variable = Variable::plain(name, scope.some_type(rng));
            let (selector, a, b) =
                (scope.constant(1, rng), scope.value(&variable.ty, 2, rng), scope.value(&variable.ty, 2, rng));
            let text = format!(
                "  {};\n  case ({selector})\n    0, 1: begin : g_a\n      assign {name} = {a};\n    end\n    default: begin \
                 : g_b\n      assign {name} = {b};\n    end\n  endcase\n",
                variable.declaration()
            );
            scope.variables.push(variable);
            text
        }
        _ => {
            let variable = Variable::any(name, scope, rng);
            let text = format!("  {};\n{}", variable.declaration(), drive(&variable, scope, rng));
            scope.variables.push(variable);
            text
        }
    }
}

/// A process or an assignment that drives all of `variable`.
fn drive(variable: &Variable, scope: &Scope, rng: &mut Rng) -> String {
    let name = &variable.name;
    let value = variable.whole_value(scope, 2, rng);
    let target = |operator| Target { variable: variable.clone(), operator, loops: true };
    match rng.u32(..6) {
        0 | 1 => format!("  assign {name} = {value};\n"),
        2 => {
            let first = format!("    {name} = {value};\n");
            let rest: String = (0..rng.usize(1..4)).map(|_| scope.statement(&[&target("=")], 3, 4, rng)).collect();
            let head = if rng.bool() { "always_comb" } else { "always @*" };
            format!("  {head} begin\n{first}{rest}  end\n")
        }
        3 | 4 => {
            let rest: String = (0..rng.usize(1..3)).map(|_| scope.statement(&[&target("<=")], 3, 6, rng)).collect();
            let head = if rng.bool() { "always_ff" } else { "always" };
            let zero = if variable.unpacked.is_empty() { "'0" } else { "'{default: '0}" };
            format!(
                "  {head} @(posedge clk or negedge rst_n)\n    if (!rst_n) {name} <= {zero};\n    else begin\n{rest}    end\n"
            )
        }
        _ => format!("  always_latch\n    if ({}) {name} <= {value};\n", scope.expression(1, rng)),
    }
}

fn instance(name: &str, module: &Module, scope: &mut Scope, rng: &mut Rng) -> String {
    let mut text = String::new();
    let mut parameters: Vec<String> =
        module.parameters.iter().map(|parameter| format!(".{parameter}({})", rng.u32(1..7))).collect();
    if module.has_type && rng.bool() {
        parameters.push(".T(logic [1:0][3:0])".to_string());
    }
    let mut connections = vec![".clk".to_string(), ".rst_n(rst_n)".to_string()];
    if let Some(bus) = &module.bus {
        text += &format!("  bus_if #(.W({})) {name}_bus (.clk(clk));\n", rng.u32(1..9));
        let (data, valid) = (scope.expression(1, rng), scope.expression(1, rng));
        text += &format!("  assign {name}_bus.data = {data};\n  assign {name}_bus.valid = {valid};\n");
        text += &format!("  assign {name}_bus.meta = '0;\n");
        connections.push(format!(".{bus}({name}_bus)"));
    }
    for (is_output, port) in &module.ports {
        let value = if *is_output {
            let count: usize = port.unpacked.iter().product();
            let net = Variable {
                name: format!("{name}_{}", port.name),
                ty: Type::vector("logic [11:0]", 12),
                unpacked: if port.unpacked.is_empty() { Vec::new() } else { vec![count] },
            };
            text += &format!("  {};\n", net.declaration());
            scope.variables.push(net.clone());
            net.name
        } else {
            port.whole_value(scope, 1, rng)
        };
        connections.push(format!(".{}({value})", port.name));
    }
    let parameters = if parameters.is_empty() { String::new() } else { format!(" #({})", parameters.join(", ")) };
    text + &format!("  {}{parameters} {name} (\n    {}\n  );\n", module.name, connections.join(",\n    "))
}

/// Something that only a simulator looks at.
fn for_simulation(scope: &Scope, rng: &mut Rng) -> String {
    match rng.u32(..8) {
        0 => format!("  initial $display(\"%d\", {});\n", scope.expression(1, rng)),
        1 => format!(
            "  assert property (@(posedge clk) {} |-> {});\n",
            scope.expression(1, rng),
            scope.expression(1, rng)
        ),
        2 => "  initial begin #10; $finish; end\n".to_string(),
        3 => format!("  always_comb assert ({});\n", scope.expression(1, rng)),
        _ => String::new(),
    }
}
