//! A compact one-line form of the owned syntax tree, for comparisons against trees derived by hand.

use stillwire::syntax::ast::*;

fn list<T>(items: &[T], f: impl Fn(&T) -> String) -> String {
    items.iter().map(f).collect::<Vec<_>>().join(" ")
}

fn opt<T>(item: &Option<T>, f: impl Fn(&T) -> String) -> String {
    item.as_ref().map_or("_".to_string(), f)
}

fn name(ident: &Ident) -> String {
    ident.name.clone()
}

pub fn expr(e: &Expr) -> String {
    match &e.kind {
        ExprKind::Number(l) => {
            let width = l.width.map_or(String::new(), |w| w.to_string());
            match (l.based, l.signed) {
                (false, _) => u64::from_str_radix(&l.bits, 2).map_or(format!("d{}", l.bits), |v| v.to_string()),
                (true, true) => format!("{width}'sb{}", l.bits),
                (true, false) => format!("{width}'b{}", l.bits),
            }
        }
        ExprKind::Fill(c) => format!("'{c}"),
        ExprKind::Real(v) => format!("{v:?}"),
        ExprKind::String(s) => format!("{s:?}"),
        ExprKind::TimeLiteral(v) => format!("{v:e}s"),
        ExprKind::Name(n) => name(n),
        ExprKind::Scoped { package, name: n } => format!("{}::{}", package.name, n.name),
        ExprKind::Member(base, n) => format!("{}.{}", expr(base), n.name),
        ExprKind::Index(base, i) => format!("{}[{}]", expr(base), expr(i)),
        ExprKind::Slice { base, kind, left, right } => {
            let op = match kind {
                SliceKind::Constant => ":",
                SliceKind::Up => "+:",
                SliceKind::Down => "-:",
            };
            format!("{}[{}{op}{}]", expr(base), expr(left), expr(right))
        }
        ExprKind::Unary(op, a) => format!("({op:?} {})", expr(a)),
        ExprKind::Binary(op, a, b) => format!("({op:?} {} {})", expr(a), expr(b)),
        ExprKind::Cond(c, a, b) => format!("(? {} {} {})", expr(c), expr(a), expr(b)),
        ExprKind::Concat(parts) => format!("{{{}}}", list(parts, expr)),
        ExprKind::Replicate(n, parts) => format!("{{{} x {}}}", expr(n), list(parts, expr)),
        ExprKind::Stream { left, slice, parts } => {
            let op = if *left { "<<" } else { ">>" };
            format!("{{{op} {} {}}}", opt(slice, |s| expr(s)), list(parts, expr))
        }
        ExprKind::Pattern { ty, items } => format!("{}'{{{}}}", opt(ty, |t| data_type(t)), list(items, pattern_item)),
        ExprKind::Call { callee, args } => {
            let args = list(args, |a| {
                let value = opt(&a.value, expr);
                a.name.as_ref().map_or(value.clone(), |n| format!(".{}={value}", n.name))
            });
            format!("{}({args})", expr(callee))
        }
        ExprKind::SystemCall { name, args } => format!("{name}({})", list(args, |a| opt(a, expr))),
        ExprKind::Cast(kind, a) => {
            let kind = match kind {
                CastKind::Type(t) => format!("type {}", data_type(t)),
                CastKind::Size(e) => expr(e),
                other => format!("{other:?}"),
            };
            format!("(cast {kind} {})", expr(a))
        }
        ExprKind::Inside(a, ranges) => format!("(inside {} {})", expr(a), list(ranges, expr)),
        ExprKind::Range(a, b) => format!("[{}:{}]", opt(a, |e| expr(e)), opt(b, |e| expr(e))),
        ExprKind::MinTypMax(a, b, c) => format!("(mtm {} {} {})", expr(a), expr(b), expr(c)),
        ExprKind::Type(t) => format!("type {}", data_type(t)),
        ExprKind::Assign(a) => format!("({})", assignment(a)),
        ExprKind::Postfix(a) => format!("(before {})", assignment(a)),
        ExprKind::Reduce { array, method, iterator, with } => {
            let iterator = iterator.as_ref().map_or("item", |name| &name.name);
            format!("({}.{} {iterator} with {})", expr(array), method.name, expr(with))
        }
        ExprKind::Unsupported(what) => format!("<unsupported {what}>"),
    }
}

fn pattern_item(item: &PatternItem) -> String {
    let value = expr(&item.value);
    match &item.key {
        PatternKey::None => value,
        PatternKey::Default => format!("default:{value}"),
        PatternKey::Expr(key) => format!("{}:{value}", expr(key)),
        PatternKey::Type(ty) => format!("type {}:{value}", data_type(ty)),
        PatternKey::Repeat(n, more) if more.is_empty() => format!("{}x{value}", expr(n)),
        PatternKey::Repeat(n, more) => format!("{}x({value} {})", expr(n), list(more, expr)),
    }
}

fn assignment(a: &Assignment) -> String {
    let op = a.op.map_or(String::new(), |op| format!("{op:?}"));
    let eq = if a.nonblocking { "<=" } else { "=" };
    format!("{} {op}{eq} {}", expr(&a.target), expr(&a.value))
}

fn dims(dims: &[Dim]) -> String {
    dims.iter()
        .map(|d| match d {
            Dim::Range(a, b) => format!("[{}:{}]", expr(a), expr(b)),
            Dim::Size(n) => format!("[{}]", expr(n)),
            Dim::Dynamic(_) => "[dynamic]".to_string(),
        })
        .collect()
}

pub fn data_type(t: &DataType) -> String {
    let kind = match &t.kind {
        DataTypeKind::Named { package: None, name: n } => name(n),
        DataTypeKind::Named { package: Some(p), name: n } => format!("{}::{}", p.name, n.name),
        DataTypeKind::Enum { base, members } => {
            let members = list(members, |m| {
                let range = opt(&m.range, |(a, b)| format!("[{}:{}]", expr(a), opt(b, expr)));
                let range = if m.range.is_none() { String::new() } else { range };
                format!("{}{range}={}", m.name.name, opt(&m.value, expr))
            });
            format!("enum {} {{{members}}}", opt(base, |b| data_type(b)))
        }
        DataTypeKind::Struct { union, packed, tagged, members } => {
            let members = list(members, |m| format!("{} {}{};", data_type(&m.ty), m.name.name, dims(&m.dims)));
            let word = if *union { "union" } else { "struct" };
            let packed = if *packed { " packed" } else { "" };
            let tagged = if *tagged { " tagged" } else { "" };
            format!("{word}{tagged}{packed} {{{members}}}")
        }
        DataTypeKind::TypeOf(e) => format!("typeof({})", expr(e)),
        DataTypeKind::Unsupported(what) => format!("<unsupported {what}>"),
        DataTypeKind::Implicit => "implicit".to_string(),
        other => format!("{other:?}").to_lowercase(),
    };
    let signed = match t.signed {
        None => "",
        Some(true) => " signed",
        Some(false) => " unsigned",
    };
    format!("{kind}{signed}{}", dims(&t.packed))
}

fn declarator(d: &Declarator) -> String {
    let init = d.init.as_ref().map_or(String::new(), |e| format!("={}", expr(e)));
    let once = if d.once && d.init.is_some() { "once " } else { "" };
    format!("{once}{}{}{init}", d.name.name, dims(&d.dims))
}

pub fn param(p: &Param) -> String {
    let word = if p.local { "localparam" } else { "parameter" };
    match &p.kind {
        ParamKind::Value { ty, dims: d, default } => {
            format!("({word} {} {}{} {})", opt(ty, data_type), p.name.name, dims(d), opt(default, expr))
        }
        ParamKind::Type { default } => format!("({word} type {} {})", p.name.name, opt(default, data_type)),
    }
}

pub fn attributes(list: &Attributes) -> String {
    list.iter().map(|a| format!("(* {}={} *) ", a.name.name, opt(&a.value, expr))).collect()
}

pub fn ports(p: &Ports) -> String {
    match p {
        Ports::Wildcard => "(.*)".to_string(),
        Ports::None => "none".to_string(),
        Ports::Ansi(ports) => list(ports, |p| {
            let default = p.default.as_ref().map_or(String::new(), |e| format!("={}", expr(e)));
            let kind = match &p.kind {
                AnsiPortKind::Data { direction, net, ty } => {
                    let net = net.map_or("var".to_string(), |n| format!("{n:?}"));
                    format!("{direction:?} {net} {}", data_type(ty))
                }
                AnsiPortKind::Interface { interface, modport, direction } => {
                    format!("interface {}.{} {direction:?}", opt(interface, name), opt(modport, name))
                }
                AnsiPortKind::Explicit { direction, expr: e } => format!("{direction:?} explicit {}", opt(e, expr)),
            };
            format!("({}{kind} {}{}{default})", attributes(&p.attributes), p.name.name, dims(&p.dims))
        }),
        Ports::NonAnsi(refs) => list(refs, |r| format!("(ref {} {})", opt(&r.name, name), opt(&r.expr, expr))),
    }
}

fn connection(c: &Connection) -> String {
    match c {
        Connection::Ordered(e, _) => opt(e, expr),
        Connection::Named { name: n, value } => format!(".{}({})", n.name, opt(value, expr)),
        Connection::Implicit(n) => format!(".{}", n.name),
        Connection::All(_) => ".*".to_string(),
    }
}

fn gen_block(b: &GenBlock) -> String {
    let label = b.label.as_ref().map_or(String::new(), |l| format!(":{}", l.name));
    let (open, close) = if b.scoped { ("begin", "end") } else { ("<", ">") };
    format!("{open}{label} {} {close}", items(&b.items))
}

fn imports(list_of: &[Import]) -> String {
    list(list_of, |i| format!("{}::{}", i.package.name, i.name.as_ref().map_or("*", |n| &n.name)))
}

fn function(f: &Function) -> String {
    let auto = if f.automatic { " automatic" } else { "" };
    let args = list(&f.args, |a| {
        let default = a.default.as_ref().map_or(String::new(), |e| format!("={}", expr(e)));
        format!("({:?} {} {}{}{default})", a.direction, data_type(&a.ty), a.name.name, dims(&a.dims))
    });
    format!("{auto} {} {} [{args}] [{}] {}", data_type(&f.ret), f.name.name, items(&f.locals), list(&f.body, stmt))
}

pub fn items(list_of: &[Item]) -> String {
    list(list_of, item)
}

pub fn item(i: &Item) -> String {
    let attributes = attributes(&i.attributes);
    let body = match &i.kind {
        ItemKind::PortDecl { direction, net, ty, names, is_var } => {
            let net = opt(net, |n| format!("{n:?}"));
            let var = if *is_var { " var" } else { "" };
            format!("port {direction:?} {net}{var} {} {}", data_type(ty), list(names, declarator))
        }
        ItemKind::Net { net, ty, names } => format!("net {net:?} {} {}", data_type(ty), list(names, declarator)),
        ItemKind::Var { ty, names } => format!("var {} {}", data_type(ty), list(names, declarator)),
        ItemKind::Param(p) => return format!("{attributes}{}", param(p)),
        ItemKind::Typedef { name: n, ty, dims: d } => format!("typedef {} {}{}", n.name, opt(ty, data_type), dims(d)),
        ItemKind::Import(i) => format!("import {}", imports(i)),
        ItemKind::Export(i) => format!("export {}", imports(i)),
        ItemKind::Genvar(names) => format!("genvar {}", list(names, name)),
        ItemKind::Function(f) => format!("function{}", function(f)),
        ItemKind::Task(f) => format!("task{}", function(f)),
        ItemKind::Assign(list_of) => format!("assign {}", list(list_of, |(a, b)| format!("{} = {}", expr(a), expr(b)))),
        ItemKind::Alias(nets) => format!("alias {}", list(nets, expr)),
        ItemKind::Process(p) => {
            let sensitivity = match &p.sensitivity {
                None => String::new(),
                Some(Sensitivity::Star) => " @*".to_string(),
                Some(Sensitivity::List(events)) => {
                    let events = list(events, |e| {
                        let edge = e.edge.map_or(String::new(), |edge| format!("{edge:?} "));
                        let iff = e.iff.as_ref().map_or(String::new(), |c| format!(" iff {}", expr(c)));
                        format!("({edge}{}{iff})", expr(&e.expr))
                    });
                    format!(" @({events})")
                }
            };
            format!("{:?}{sensitivity} {}", p.kind, stmt(&p.body))
        }
        ItemKind::Instances { module, params, instances } => {
            let params = list(params, connection);
            let instances =
                list(instances, |i| format!("{}{}({})", i.name.name, dims(&i.dims), list(&i.connections, connection)));
            format!("inst {} #({params}) {instances}", module.name)
        }
        ItemKind::Gates { gate, instances } => {
            let instances =
                list(instances, |g| format!("{}{}({})", opt(&g.name, name), dims(&g.dims), list(&g.terminals, expr)));
            format!("gate {gate:?} {instances}")
        }
        ItemKind::Defparam(list_of) => {
            format!("defparam {}", list(list_of, |(a, b)| format!("{} = {}", expr(a), expr(b))))
        }
        ItemKind::GenBlock(b) => format!("generate {}", gen_block(b)),
        ItemKind::GenFor { init, cond, step, body } => {
            let genvar = if init.declares { "genvar " } else { "" };
            format!(
                "genfor {genvar}{}={} {} {} {}",
                init.name.name,
                expr(&init.value),
                expr(cond),
                assignment(step),
                gen_block(body)
            )
        }
        ItemKind::GenIf { cond, then, otherwise } => {
            format!("genif {} {} {}", expr(cond), gen_block(then), opt(otherwise, gen_block))
        }
        ItemKind::GenCase { subject, arms, default } => {
            let arms = list(arms, |(labels, block)| format!("({}: {})", list(labels, expr), gen_block(block)));
            format!("gencase {} {arms} {}", expr(subject), opt(default, gen_block))
        }
        ItemKind::InterfacePort { interface, modport, names } => {
            format!("port {}.{} {}", interface.name, modport.name, list(names, declarator))
        }
        ItemKind::Modport { name: n, ports, imports } => {
            let imports: String = imports.iter().map(|n| format!(" import {}", n.name)).collect();
            let ports = list(ports, |p| {
                let expr = p.expr.as_ref().map_or(String::new(), |e| format!("={}", expr(e)));
                format!("({:?} {}{expr})", p.direction, p.name.name)
            });
            format!("modport {} {ports}{imports}", n.name)
        }
        ItemKind::Module(m) => return module(m),
        ItemKind::Bind { target, item: i } => format!("bind {} {}", expr(target), item(i)),
        ItemKind::Let { name: n, args, body } => {
            let args = list(args, |(n, default)| format!("{}={}", n.name, opt(default, expr)));
            format!("let {} [{args}] {}", n.name, expr(body))
        }
        ItemKind::ElabTask { name: n } => format!("elab {n}"),
        ItemKind::Skipped(what) => format!("skipped {what}"),
        ItemKind::Simulation { what, name, .. } => format!("skipped {what} {}", self::name(name)),
        ItemKind::Unsupported(what) => format!("unsupported {what}"),
    };
    format!("{attributes}({body})")
}

pub fn stmt(s: &Stmt) -> String {
    let attributes = attributes(&s.attributes);
    let body = match &s.kind {
        StmtKind::Empty => ";".to_string(),
        StmtKind::Block { label, decls, body } => {
            let label = label.as_ref().map_or(String::new(), |l| format!(":{}", l.name));
            let decls = if decls.is_empty() { String::new() } else { format!("[{}] ", items(decls)) };
            format!("begin{label} {decls}{}", list(body, stmt))
        }
        StmtKind::Assign(a) => return format!("{attributes}({})", assignment(a)),
        StmtKind::If { cond, then, otherwise, unique } => {
            let unique = unique.map_or(String::new(), |u| format!("{u:?} "));
            let otherwise = otherwise.as_ref().map_or(String::new(), |s| format!(" {}", stmt(s)));
            format!("{unique}if {} {}{otherwise}", expr(cond), stmt(then))
        }
        StmtKind::Case(c) => {
            let unique = c.unique.map_or(String::new(), |u| format!("{u:?} "));
            let arms = list(&c.arms, |a| format!("({}: {})", list(&a.labels, expr), stmt(&a.body)));
            let default = c.default.as_ref().map_or(String::new(), |s| format!(" (default {})", stmt(s)));
            format!("{unique}{:?} {} {arms}{default}", c.kind, expr(&c.subject))
        }
        StmtKind::For { init, cond, step, body } => {
            let init = list(init, |i| match i {
                ForInit::Declare { ty, name: n, value } => format!("({} {} = {})", data_type(ty), n.name, expr(value)),
                ForInit::Assign(a) => format!("({})", assignment(a)),
            });
            let step = list(step, |a| format!("({})", assignment(a)));
            format!("for [{init}] {} [{step}] {}", opt(cond, expr), stmt(body))
        }
        StmtKind::Foreach { array, vars, body } => {
            format!("foreach {}[{}] {}", expr(array), list(vars, |v| opt(v, name)), stmt(body))
        }
        StmtKind::While { cond, body } => format!("while {} {}", expr(cond), stmt(body)),
        StmtKind::DoWhile { cond, body } => format!("do {} {}", stmt(body), expr(cond)),
        StmtKind::Repeat { count, body } => format!("repeat {} {}", expr(count), stmt(body)),
        StmtKind::Forever { body } => format!("forever {}", stmt(body)),
        StmtKind::Call(e) => format!("call {}", expr(e)),
        StmtKind::Return(e) => format!("return {}", opt(e, expr)),
        StmtKind::Break => "break".to_string(),
        StmtKind::Continue => "continue".to_string(),
        StmtKind::Disable(e) => format!("disable {}", expr(e)),
        StmtKind::Timed { what, body } => format!("timed {what:?} {}", stmt(body)),
        StmtKind::Unsupported(what) => format!("unsupported {what}"),
        StmtKind::Skipped(what) => format!("skipped {what}"),
    };
    format!("{attributes}({body})")
}

pub fn module(m: &Module) -> String {
    format!(
        "{}({:?} {} #[{}] [{}] {})",
        attributes(&m.attributes),
        m.kind,
        m.name.name,
        list(&m.params, param),
        ports(&m.ports),
        items(&m.items)
    )
}

pub fn udp(u: &Udp) -> String {
    let rows = list(&u.rows, |r| {
        let inputs = r.inputs.iter().map(|s| match s {
            UdpSymbol::Level(c) | UdpSymbol::EdgeLetter(c) => c.to_string(),
            UdpSymbol::Edge(a, b) => format!("({a}{b})"),
        });
        let inputs: String = inputs.collect();
        let state = r.state.map_or(String::new(), |c| format!(":{c}"));
        format!("{inputs}{state}:{}", r.output)
    });
    let kind = if u.sequential { "sequential" } else { "combinational" };
    let initial = u.initial.map_or(String::new(), |c| format!(" initial {c}"));
    format!("({kind} {} {} [{}]{initial} {rows})", u.name.name, u.output.name, list(&u.inputs, name))
}
