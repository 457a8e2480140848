//! The demo of the README: each mistake of the canal lock is found, none of its safe twins is reported, and the scan is
//! complete. The list is written from the comments in `fixtures/lock`, not from a run.

use std::collections::BTreeSet;
use std::path::Path;

use crate::pipeline::{Scan, scan};

fn lock() -> Scan {
    scan(&[&Path::new(env!("CARGO_MANIFEST_DIR")).join("fixtures/lock")], &[])
}

#[test]
fn every_mistake_is_found_and_no_twin() {
    let scan = lock();
    assert_eq!(scan.exit, 1, "{}", scan.text);
    assert_eq!(scan.json["complete"], true);
    let found: BTreeSet<(String, String, String)> = scan
        .findings()
        .iter()
        .map(|finding| {
            let text = |key: &str| finding[key].as_str().unwrap_or_default().to_string();
            (text("rule"), text("severity"), text("net"))
        })
        .collect();
    let expected = [
        ("clock-hazard", "error", "lock_top.u_gauge.strobe"),
        ("clock-hazard", "error", "lock_top.u_pump.gated"),
        ("combinational-loop", "error", "lock_top.u_mode.stored"),
        ("combinational-loop", "note", "lock_top.u_mode.stored_safe"),
        ("latch-enable-hazard", "error", "lock_top.u_sluice.closed"),
        ("reconvergent-inversion", "warning", "lock_top.lamp_red"),
        ("reset-release", "note", "lock_top.por_n"),
        ("set-reset-hazard", "error", "lock_top.u_stop.stop_n"),
        ("set-reset-hazard", "warning", "lock_top.u_watchdog.alive_n"),
    ];
    let expected = expected.map(|(rule, severity, net)| (rule.to_string(), severity.to_string(), net.to_string()));
    assert_eq!(found, BTreeSet::from(expected), "{}", scan.text);
}

#[test]
fn what_was_signed_off_and_left_out_is_listed() {
    let scan = lock();
    let signed_off: Vec<_> = scan.findings().iter().filter(|finding| !finding["signoff"].is_null()).collect();
    let [lamp] = signed_off.as_slice() else { panic!("{} findings are signed off", signed_off.len()) };
    assert_eq!(lamp["net"], "lock_top.lamp_red");
    assert_eq!(lamp["signoff"]["by"], "T. Lockwood");
    assert_eq!(lamp["signoff"]["until"], "2099-12-31");
    let coverage = &scan.json["coverage"];
    assert_eq!(coverage["left_out"]["benches"], serde_json::json!(["lock_tb"]));
    assert_eq!(coverage["left_out"]["regions"].as_array().map(Vec::len), Some(1));
    assert_eq!(coverage["files"], serde_json::json!({"read": 9, "failed": 0}));
    assert_eq!(coverage["loops"]["found"], 2);
}

/// One stop line resets both motors, three flip-flops each; the finding stands where the selector is.
#[test]
fn a_net_is_one_finding_whatever_hangs_on_it() {
    let scan = lock();
    let stop = scan.findings().iter().find(|finding| finding["net"] == "lock_top.u_stop.stop_n");
    let stop = stop.expect("the stop line is found");
    assert_eq!(stop["pin"]["count"], 6);
    assert_eq!(stop["pin"]["active"], 0);
    let hazards = stop["hazards"].as_array().expect("hazards");
    assert_eq!(hazards.len(), 1);
    assert_eq!(hazards[0]["changes"], serde_json::json!(["lock_top.hand"]));
    assert_eq!(stop["cover"]["proven"], true);
}
