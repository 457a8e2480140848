//! Two SystemVerilog cores with asynchronous resets, latches and gated clocks: ibex with each of its three register files,
//! cv32e40p with both of its own. Each is scanned complete, and what is reported is what was read: the findings one by
//! one, and how many register bits, latch bits, clocks, resets and latch enables there are.
//!
//! How the bits were counted: [`crate::registers`] finds in the text of each module below the top which variables its
//! processes store. For each of these the tables below say how many bits of it there are in the whole design, read by hand
//! from its declaration, the parameters and the number of instances; 0 where a generate condition or the preprocessor
//! leaves its process out. Text and table must name the same variables, so none can be forgotten.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

use crate::cores::findings;
use crate::outside::data;
use crate::pipeline::{Scan, scan_in};
use crate::registers::stored;

/// The variables that the processes of one file store.
struct Module {
    /// Below the folder of the core.
    file: &'static str,
    /// Bits in the whole design with the default parameters of the top.
    clocked: &'static [(&'static str, usize)],
    latched: &'static [(&'static str, usize)],
}

/// What the whole design has beside the bits.
struct Nets {
    clocks: u64,
    resets: u64,
    latch_enables: u64,
}

/// Rule, severity, net and hazard kinds.
type Reviewed = (&'static str, &'static str, &'static str, &'static [&'static str]);

/// Of ibex_top with its default parameters: no PMP, no counters beside mcycle and minstret, the fast multiplier, no bit
/// manipulation, no write-back stage, no instruction cache, no branch prediction, no triggers, not the secure variant (so
/// `ResetAll`, `DummyInstructions`, `MemECC`, `ShadowCSR` and `DataIndTiming` are 0), no RVFI. With SYNTHESIS defined the
/// registers of the assertions are out.
const IBEX: &[Module] = &[
    Module {
        file: "rtl/ibex_controller.sv",
        // The state is an enumeration of four bits, the cause of debugging one of three.
        clocked: &[
            ("ctrl_fsm_cs", 4),
            ("debug_cause_q", 3),
            ("debug_mode_q", 1),
            ("do_single_step_q", 1),
            ("enter_debug_mode_prio_q", 1),
            ("exc_req_q", 1),
            ("illegal_insn_q", 1),
            ("load_err_q", 1),
            ("nmi_mode_q", 1),
            ("store_err_q", 1),
            // Under `MemECC`.
            ("mem_resp_intg_err_addr_q", 0),
            ("mem_resp_intg_err_irq_pending_q", 0),
            // For assertions.
            ("exception_req_accepted", 0),
            ("exception_req_pending", 0),
            ("expect_exception_pc_set", 0),
            ("seen_exception_pc_set", 0),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_core.sv",
        // For assertions; all others under RVFI, see `RVFI`.
        clocked: &[("last_fetch_enable", 0), ("pc_at_fetch_disable", 0)],
        latched: &[],
    },
    // mcycle and minstret, 64 bits each.
    Module { file: "rtl/ibex_counter.sv", clocked: &[("counter_q", 2 * 64)], latched: &[] },
    Module {
        file: "rtl/ibex_cs_registers.sv",
        // `mcountinhibit_q` is `[MHPMCounterNum+3-1:0]`.
        clocked: &[("priv_lvl_q", 2), ("mcountinhibit_q", 3)],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_csr.sv",
        // mstatus (status_t: 4 flags and a level of two bits), mie (irqs_t: 3 + 15), mcause and mstack_cause (exc_cause_t: 2 +
        // 5), mstack (status_stk_t: 1 + 2), cpuctrlsts (cpu_ctrl_sts_part_t: 1 + 1 + 3 + 1 + 1 + 1), and nine of 32 bits:
        // mepc, mscratch, mtval, mtvec, dcsr, depc, dscratch0, dscratch1, mstack_epc.
        clocked: &[("rdata_q", 6 + 18 + 7 + 7 + 3 + 8 + 9 * 32), ("shadow_q", 0)],
        latched: &[],
    },
    // Only with bit manipulation.
    Module { file: "rtl/ibex_decoder.sv", clocked: &[("use_rs3_q", 0)], latched: &[] },
    Module {
        file: "rtl/ibex_fetch_fifo.sv",
        // Three entries; the address is `[31:1]`.
        clocked: &[("instr_addr_q", 31), ("valid_q", 3), ("rdata_q", 3 * 32), ("err_q", 3)],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_id_stage.sv",
        clocked: &[
            ("imd_val_q", 2 * 34),
            ("branch_set_raw_q", 1),
            ("branch_jump_set_done_q", 1),
            ("id_fsm_q", 1),
            // Under `DataIndTiming`.
            ("branch_taken_q", 0),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_if_stage.sv",
        clocked: &[
            ("instr_valid_id_q", 1),
            ("instr_new_id_q", 1),
            ("instr_rdata_id_o", 32),
            ("instr_rdata_alu_id_o", 32),
            ("instr_fetch_err_o", 1),
            ("instr_fetch_err_plus2_o", 1),
            ("instr_rdata_c_id_o", 16),
            ("instr_is_compressed_id_o", 1),
            ("illegal_c_insn_id_o", 1),
            ("pc_id_o", 32),
            // Under `DummyInstructions`, `PCIncrCheck` and `BranchPredictor`.
            ("dummy_instr_id_o", 0),
            ("prev_instr_seq_q", 0),
            ("instr_bp_taken_q", 0),
            ("instr_skid_addr_q", 0),
            ("instr_skid_bp_taken_q", 0),
            ("instr_skid_data_q", 0),
            ("instr_skid_valid_q", 0),
            // For assertions, under `BranchPredictor` too.
            ("mispredicted_q", 0),
            ("predicted_branch_live_q", 0),
            ("predicted_branch_nt_pc_q", 0),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_load_store_unit.sv",
        // `rdata_q` is `[31:8]`; the last two are for coverage, which SYNTHESIS takes out as well.
        clocked: &[
            ("rdata_q", 24),
            ("rdata_offset_q", 2),
            ("data_type_q", 2),
            ("data_sign_ext_q", 1),
            ("data_we_q", 1),
            ("addr_last_q", 32),
            ("ls_fsm_cs", 3),
            ("handle_misaligned_q", 1),
            ("pmp_err_q", 1),
            ("lsu_err_q", 1),
            ("fcov_mis_2_en_q", 0),
            ("fcov_mis_bus_err_1_q", 0),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_multdiv_fast.sv",
        // `mult_state_q` has two bits, and one in the single-cycle variant, which is not taken.
        clocked: &[
            ("div_counter_q", 5),
            ("md_state_q", 3),
            ("op_numerator_q", 32),
            ("op_quotient_q", 32),
            ("div_by_zero_q", 1),
            ("mult_state_q", 2),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_prefetch_buffer.sv",
        clocked: &[
            ("stored_addr_q", 32),
            ("fetch_addr_q", 32),
            ("valid_req_q", 1),
            ("discard_req_q", 1),
            ("rdata_outstanding_q", 2),
            ("branch_discard_q", 2),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_top.sv",
        clocked: &[
            ("core_busy_q", 4),
            // Under `ICacheScramble`.
            ("sampled_scramble_key", 0),
            ("scramble_key_q", 0),
            ("scramble_key_valid_q", 0),
            ("scramble_nonce_q", 0),
            ("scramble_req_q", 0),
            // For assertions, the last two under RVFI.
            ("pending_dside_accesses_q", 0),
            ("double_fault_seen_delay_buffer_q", 0),
            ("sync_exc_seen", 0),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/ibex_wb_stage.sv",
        // Under `WritebackStage`.
        clocked: &[
            ("dummy_instr_wb_q", 0),
            ("rf_waddr_wb_q", 0),
            ("rf_wdata_wb_q", 0),
            ("rf_we_wb_q", 0),
            ("wb_compressed_q", 0),
            ("wb_count_q", 0),
            ("wb_instr_type_q", 0),
            ("wb_pc_q", 0),
            ("wb_valid_q", 0),
        ],
        latched: &[],
    },
    Module { file: "rtl/ibex_alu.sv", clocked: &[], latched: &[] },
    Module { file: "rtl/ibex_compressed_decoder.sv", clocked: &[], latched: &[] },
    Module { file: "rtl/ibex_ex_block.sv", clocked: &[], latched: &[] },
    Module { file: "dv/uvm/core_ibex/common/prim/prim_buf.sv", clocked: &[], latched: &[] },
    Module { file: "dv/uvm/core_ibex/common/prim/prim_clock_gating.sv", clocked: &[], latched: &[] },
    Module { file: "vendor/lowrisc_ip/ip/prim_generic/rtl/prim_generic_buf.sv", clocked: &[], latched: &[] },
];

/// What begins so in ibex_core.sv is written under RVFI only.
const RVFI: [&str; 2] = ["rvfi_", "captured_"];

/// Bits for the assertions and the coverage of ibex, present unless SYNTHESIS is defined: the four flags of the controller, an
/// address and a multi-bit flag of the core, two entries of two bits of the top, two flags of the load-store unit. Those of
/// the fetch stage stand under `BranchPredictor`.
const IBEX_ASSERTIONS: usize = 4 + (32 + 4) + 2 * 2 + 2;

/// The clock gate of the core is a latch. Its clock `clk_i` also clocks `core_busy_q`, the gated clock everything else.
const IBEX_FF: (&[Module], Nets) = (
    &[
        Module {
            file: "rtl/ibex_register_file_ff.sv",
            clocked: &[("rf_reg_q", 31 * 32), ("rf_r0_q", 0)],
            latched: &[],
        },
        gate("vendor/lowrisc_ip/ip/prim_generic/rtl/prim_generic_clock_gating.sv", &[("en_latch", 1)]),
    ],
    Nets { clocks: 2, resets: 1, latch_enables: 1 },
);

const IBEX_FPGA: (&[Module], Nets) = (
    &[
        Module { file: "rtl/ibex_register_file_fpga.sv", clocked: &[("mem", 32 * 32)], latched: &[] },
        gate("vendor/lowrisc_ip/ip/prim_generic/rtl/prim_generic_clock_gating.sv", &[("en_latch", 1)]),
    ],
    Nets { clocks: 2, resets: 1, latch_enables: 1 },
);

/// Clock gates: the core's, the one in front of all words, which also clocks `wdata_a_q`, and one for each of 31 words. The
/// latches in the gates are open while their clocks (three nets) are low, those of each word while its gated clock is high.
const IBEX_LATCH: (&[Module], Nets) = (
    &[
        Module {
            file: "rtl/ibex_register_file_latch.sv",
            clocked: &[("wdata_a_q", 32)],
            latched: &[("mem", 31 * 32), ("mem_r0", 0)],
        },
        gate("vendor/lowrisc_ip/ip/prim_generic/rtl/prim_generic_clock_gating.sv", &[("en_latch", 1 + 1 + 31)]),
    ],
    Nets { clocks: 3, resets: 1, latch_enables: 3 + 31 },
);

const fn gate(file: &'static str, latched: &'static [(&'static str, usize)]) -> Module {
    Module { file, clocked: &[], latched }
}

/// Of cv32e40p_top with its default parameters: COREV_PULP, COREV_CLUSTER and FPU 0, one counter beside mcycle and minstret.
const CV32E40P: &[Module] = &[
    Module {
        file: "rtl/cv32e40p_aligner.sv",
        clocked: &[
            ("state", 3),
            ("r_instr_h", 16),
            ("hwlp_addr_q", 32),
            ("pc_q", 32),
            ("aligner_ready_q", 1),
            ("hwlp_update_pc_q", 1),
        ],
        latched: &[],
    },
    Module { file: "rtl/cv32e40p_alu.sv", clocked: &[], latched: &[] },
    Module {
        file: "rtl/cv32e40p_alu_div.sv",
        clocked: &[
            ("State_SP", 2),
            ("AReg_DP", 32),
            ("BReg_DP", 32),
            ("ResReg_DP", 32),
            ("Cnt_DP", 6),
            ("RemSel_SP", 1),
            ("CompInv_SP", 1),
            ("ResInv_SP", 1),
        ],
        latched: &[],
    },
    Module {
        // Only with FPU.
        file: "rtl/cv32e40p_apu_disp.sv",
        clocked: &[
            ("valid_inflight", 0),
            ("valid_waiting", 0),
            ("addr_inflight", 0),
            ("addr_waiting", 0),
            ("apu_lat", 0),
        ],
        latched: &[],
    },
    Module { file: "rtl/cv32e40p_compressed_decoder.sv", clocked: &[], latched: &[] },
    Module {
        file: "rtl/cv32e40p_controller.sv",
        clocked: &[
            ("ctrl_fsm_cs", 5),
            ("jump_done_q", 1),
            ("data_err_q", 1),
            ("debug_mode_q", 1),
            ("illegal_insn_q", 1),
            ("debug_req_entry_q", 1),
            ("debug_force_wakeup_q", 1),
            ("debug_req_q", 1),
            ("debug_fsm_cs", 3),
            // Only with COREV_PULP.
            ("hwlp_end_4_id_q", 0),
        ],
        latched: &[],
    },
    Module {
        // For assertions, under CV32E40P_ASSERT_ON.
        file: "rtl/cv32e40p_core.sv",
        clocked: &[
            ("actual_ebrk_mepc", 0),
            ("actual_ecall_mepc", 0),
            ("actual_illegal_mepc", 0),
            ("expected_ebrk_mepc", 0),
            ("expected_ecall_mepc", 0),
            ("expected_illegal_mepc", 0),
            ("first_cause_ebrk_found", 0),
            ("first_cause_ecall_found", 0),
            ("first_cause_illegal_found", 0),
            ("first_ebrk_found", 0),
            ("first_ecall_found", 0),
            ("first_illegal_found", 0),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/cv32e40p_cs_registers.sv",
        // Status_t has five flags and a level of two bits. Counters, inhibit bits: mcycle, minstret and one more, which alone
        // has 16 event bits.
        clocked: &[
            ("mstatus_q", 7),
            ("mepc_q", 32),
            ("mcause_q", 6),
            ("depc_q", 32),
            ("dcsr_q", 32),
            ("dscratch0_q", 32),
            ("dscratch1_q", 32),
            ("mscratch_q", 32),
            ("mie_q", 32),
            ("mtvec_q", 24),
            ("mtvec_mode_q", 2),
            ("tmatch_control_exec_q", 1),
            ("tmatch_value_q", 32),
            ("mhpmcounter_q", 3 * 64),
            ("mhpmevent_q", 16),
            ("mcountinhibit_q", 3),
            // Only with FPU.
            ("frm_q", 0),
            ("fflags_q", 0),
            ("mstatus_fs_q", 0),
            // Only with PULP_SECURE.
            ("mcounteren_q", 0),
            ("pmp_reg_q", 0),
            ("priv_lvl_q", 0),
            ("ucause_q", 0),
            ("uepc_q", 0),
            ("utvec_mode_q", 0),
            ("utvec_q", 0),
        ],
        latched: &[],
    },
    Module { file: "rtl/cv32e40p_decoder.sv", clocked: &[], latched: &[] },
    Module {
        file: "rtl/cv32e40p_ex_stage.sv",
        clocked: &[
            ("regfile_waddr_lsu", 6),
            ("regfile_we_lsu", 1),
            // Only with FPU.
            ("apu_rvalid_q", 0),
            ("apu_result_q", 0),
            ("apu_flags_q", 0),
        ],
        latched: &[],
    },
    Module { file: "rtl/cv32e40p_ff_one.sv", clocked: &[], latched: &[] },
    Module {
        // Two entries.
        file: "rtl/cv32e40p_fifo.sv",
        clocked: &[("read_pointer_q", 1), ("write_pointer_q", 1), ("status_cnt_q", 2), ("mem_q", 2 * 32)],
        latched: &[],
    },
    Module {
        // Only with COREV_PULP.
        file: "rtl/cv32e40p_hwloop_regs.sv",
        clocked: &[("hwlp_start_q", 0), ("hwlp_end_q", 0), ("hwlp_counter_q", 0)],
        latched: &[],
    },
    Module {
        file: "rtl/cv32e40p_id_stage.sv",
        clocked: &[
            ("alu_en_ex_o", 1),
            ("alu_operator_ex_o", 7),
            ("alu_operand_a_ex_o", 32),
            ("alu_operand_b_ex_o", 32),
            ("alu_operand_c_ex_o", 32),
            ("bmask_a_ex_o", 5),
            ("bmask_b_ex_o", 5),
            ("imm_vec_ext_ex_o", 2),
            ("alu_vec_mode_ex_o", 2),
            ("alu_clpx_shift_ex_o", 2),
            ("alu_is_clpx_ex_o", 1),
            ("alu_is_subrot_ex_o", 1),
            ("mult_operator_ex_o", 3),
            ("mult_operand_a_ex_o", 32),
            ("mult_operand_b_ex_o", 32),
            ("mult_operand_c_ex_o", 32),
            ("mult_en_ex_o", 1),
            ("mult_sel_subword_ex_o", 1),
            ("mult_signed_mode_ex_o", 2),
            ("mult_imm_ex_o", 5),
            ("mult_dot_op_a_ex_o", 32),
            ("mult_dot_op_b_ex_o", 32),
            ("mult_dot_op_c_ex_o", 32),
            ("mult_dot_signed_ex_o", 2),
            ("mult_is_clpx_ex_o", 1),
            ("mult_clpx_shift_ex_o", 2),
            ("mult_clpx_img_ex_o", 1),
            ("apu_en_ex_o", 1),
            ("apu_op_ex_o", 6),
            ("apu_lat_ex_o", 2),
            ("apu_operands_ex_o", 3 * 32),
            ("apu_flags_ex_o", 15),
            ("apu_waddr_ex_o", 6),
            ("regfile_waddr_ex_o", 6),
            ("regfile_we_ex_o", 1),
            ("regfile_alu_waddr_ex_o", 6),
            ("regfile_alu_we_ex_o", 1),
            ("prepost_useincr_ex_o", 1),
            ("csr_access_ex_o", 1),
            ("csr_op_ex_o", 2),
            ("data_we_ex_o", 1),
            ("data_type_ex_o", 2),
            ("data_sign_ext_ex_o", 2),
            ("data_reg_offset_ex_o", 2),
            ("data_req_ex_o", 1),
            ("data_load_event_ex_o", 1),
            ("atop_ex_o", 6),
            ("data_misaligned_ex_o", 1),
            ("pc_ex_o", 32),
            ("branch_in_ex_o", 1),
            ("id_valid_q", 1),
            ("mhpmevent_minstret_o", 1),
            ("mhpmevent_load_o", 1),
            ("mhpmevent_store_o", 1),
            ("mhpmevent_jump_o", 1),
            ("mhpmevent_branch_o", 1),
            ("mhpmevent_compressed_o", 1),
            ("mhpmevent_branch_taken_o", 1),
            ("mhpmevent_jr_stall_o", 1),
            ("mhpmevent_imiss_o", 1),
            ("mhpmevent_ld_stall_o", 1),
            ("mhpmevent_pipe_stall_o", 1),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/cv32e40p_if_stage.sv",
        clocked: &[
            ("instr_valid_id_o", 1),
            ("instr_rdata_id_o", 32),
            ("is_fetch_failed_o", 1),
            ("pc_id_o", 32),
            ("is_compressed_id_o", 1),
            ("illegal_c_insn_id_o", 1),
        ],
        latched: &[],
    },
    Module { file: "rtl/cv32e40p_int_controller.sv", clocked: &[("irq_q", 32), ("irq_sec_q", 1)], latched: &[] },
    Module {
        file: "rtl/cv32e40p_load_store_unit.sv",
        clocked: &[
            ("data_type_q", 2),
            ("rdata_offset_q", 2),
            ("data_sign_ext_q", 2),
            ("data_we_q", 1),
            ("data_load_event_q", 1),
            ("rdata_q", 32),
            ("cnt_q", 2),
        ],
        latched: &[],
    },
    Module { file: "rtl/cv32e40p_mult.sv", clocked: &[("mulh_CS", 3), ("mulh_carry_q", 1)], latched: &[] },
    Module {
        // Two instances; that of the data has TRANS_STABLE and no registers.
        file: "rtl/cv32e40p_obi_interface.sv",
        clocked: &[
            ("state_q", 1),
            ("obi_addr_q", 32),
            ("obi_we_q", 1),
            ("obi_be_q", 4),
            ("obi_wdata_q", 32),
            ("obi_atop_q", 6),
        ],
        latched: &[],
    },
    Module { file: "rtl/cv32e40p_popcnt.sv", clocked: &[], latched: &[] },
    Module { file: "rtl/cv32e40p_prefetch_buffer.sv", clocked: &[], latched: &[] },
    Module {
        file: "rtl/cv32e40p_prefetch_controller.sv",
        clocked: &[
            ("state_q", 1),
            ("cnt_q", 2),
            ("flush_cnt_q", 2),
            ("trans_addr_q", 32),
            // Only with COREV_PULP.
            ("hwlp_flush_after_resp", 0),
            ("hwlp_flush_cnt_delayed_q", 0),
        ],
        latched: &[],
    },
    Module {
        file: "rtl/cv32e40p_sleep_unit.sv",
        clocked: &[("core_busy_q", 1), ("p_elw_busy_q", 1), ("fetch_enable_q", 1)],
        latched: &[],
    },
    Module { file: "rtl/cv32e40p_top.sv", clocked: &[], latched: &[] },
];

/// Word 0 is a register too, of which every edge makes 0.
const CV32E40P_FF: (&[Module], Nets) = (
    &[
        Module { file: "rtl/cv32e40p_register_file_ff.sv", clocked: &[("mem", 32 * 32), ("mem_fp", 0)], latched: &[] },
        gate("bhv/cv32e40p_sim_clock_gate.sv", &[("clk_en", 1)]),
    ],
    Nets { clocks: 2, resets: 1, latch_enables: 1 },
);

/// Word 0 is assigned 0 always and stores nothing; the others have an asynchronous reset. Gates and enables as in
/// [`IBEX_LATCH`]. `waddr_onehot_b_q` is `[31:1]`.
const CV32E40P_LATCH: (&[Module], Nets) = (
    &[
        Module {
            file: "rtl/cv32e40p_register_file_latch.sv",
            clocked: &[("wdata_a_q", 32), ("wdata_b_q", 32), ("waddr_onehot_b_q", 31)],
            latched: &[("mem", 31 * 32), ("mem_fp", 0)],
        },
        gate("bhv/cv32e40p_sim_clock_gate.sv", &[("clk_en", 1 + 1 + 31)]),
    ],
    Nets { clocks: 3, resets: 1, latch_enables: 3 + 31 },
);

/// Bits of flip-flops and of latches in the tables, after a look at the text: the names must be the same.
#[track_caller]
fn counted(core: &Path, modules: &[&[Module]]) -> (usize, usize) {
    let mut bits = (0, 0);
    for module in modules.iter().copied().flatten() {
        let text = std::fs::read_to_string(core.join(module.file)).expect("a source of the core");
        let mut found = stored(&text);
        if module.file.ends_with("ibex_core.sv") {
            found.clocked.retain(|name| !RVFI.iter().any(|start| name.starts_with(start)));
        }
        let names = |table: &[(&str, usize)]| -> BTreeSet<String> {
            table.iter().map(|(name, _)| (*name).to_string()).collect()
        };
        assert_eq!(found.clocked, names(module.clocked), "{}", module.file);
        assert_eq!(found.latched, names(module.latched), "{}", module.file);
        bits.0 += module.clocked.iter().map(|(_, bits)| bits).sum::<usize>();
        bits.1 += module.latched.iter().map(|(_, bits)| bits).sum::<usize>();
    }
    bits
}

/// Complete, with these bits, these nets and these findings.
#[track_caller]
fn check(scan: &Scan, (flip_flops, latches): (usize, usize), nets: &Nets, reviewed: &[Reviewed]) {
    assert_eq!(scan.json["complete"], true, "{}", scan.text);
    let coverage = &scan.json["coverage"];
    assert_eq!(coverage["modules"]["failed"], 0, "{}", scan.text);
    assert_eq!(coverage["unsupported"].as_array().map(Vec::len), Some(0), "{}", scan.text);
    assert_eq!(coverage["black_boxes"].as_array().map(Vec::len), Some(0), "{}", scan.text);
    for kind in ["clock", "set", "reset", "load", "latch-enable", "watch", "output"] {
        assert_eq!(scan.pins(kind, "undecided"), 0, "{kind}");
    }
    assert_eq!(coverage["cells"]["flip-flops"], flip_flops);
    assert_eq!(coverage["cells"]["latches"], latches);
    assert_eq!(scan.pins("clock", "nets"), nets.clocks);
    assert_eq!(scan.pins("latch-enable", "nets"), nets.latch_enables);
    let resets: u64 = ["set", "reset", "load"].map(|kind| scan.pins(kind, "nets")).iter().sum();
    assert_eq!(resets, nets.resets);

    let expected: BTreeMap<String, _> = reviewed
        .iter()
        .map(|&(rule, severity, net, kinds)| {
            let kinds: BTreeSet<String> = kinds.iter().map(|kind| (*kind).to_string()).collect();
            (net.to_string(), (rule.to_string(), severity.to_string(), kinds))
        })
        .collect();
    let found: BTreeMap<String, _> =
        findings(scan).into_iter().map(|(rule, severity, net, kinds)| (net, (rule, severity, kinds))).collect();
    assert_eq!(found, expected, "the findings are not the reviewed ones\n{}", scan.text);
    let worst = found.values().any(|(_, severity, _)| severity == "error");
    assert_eq!(scan.exit, i32::from(worst), "{}", scan.text);
}

/// The sources of ibex as its own list for simulation names them, without what is there for the bench and the tracer.
fn ibex_list(folder: &Path) -> PathBuf {
    let core = data().join("ibex");
    let list = std::fs::read_to_string(core.join("dv/uvm/core_ibex/ibex_dv.f")).expect("the list of ibex");
    let (rtl, _) = list.split_once("// Core DV files").expect("the part of the bench");
    let wanted = |line: &&str| line.starts_with("+incdir+") || (line.starts_with("${") && !line.contains("trac"));
    let lines: Vec<String> = rtl
        .lines()
        .filter(wanted)
        .map(|line| {
            let ip = core.join("vendor/lowrisc_ip");
            line.replace("${PRJ_DIR}", &core.to_string_lossy()).replace("${LOWRISC_IP_DIR}", &ip.to_string_lossy())
        })
        .collect();
    let dv_utils = format!("+incdir+{}", core.join("vendor/lowrisc_ip/dv/sv/dv_utils").display());
    let file = folder.join("ibex.f");
    std::fs::write(&file, lines.join("\n") + "\n" + &dv_utils + "\n").expect("the list is written");
    file
}

#[track_caller]
fn check_ibex(register_file: &str, (own, nets): &(&[Module], Nets), asserting: bool) {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let list = ibex_list(folder.path());
    let set = format!("RegFile={register_file}");
    let mut arguments = vec!["-f", list.to_str().expect("a plain path"), "--top", "ibex_top", "--set", &set];
    let mut bits = counted(&data().join("ibex"), &[IBEX, own]);
    if asserting {
        bits.0 += IBEX_ASSERTIONS;
    } else {
        arguments.extend(["-D", "SYNTHESIS"]);
    }
    let scan = scan_in(&[], &[], &arguments);
    check(&scan, bits, nets, IBEX_FINDINGS);
}

#[track_caller]
fn check_cv32e40p(latches: bool, (own, nets): &(&[Module], Nets)) {
    let core = data().join("cv32e40p");
    let folder = tempfile::tempdir().expect("a temporary folder");
    let mut list = core.join("cv32e40p_manifest.flist");
    if latches {
        let text = std::fs::read_to_string(&list).expect("the manifest");
        let text = text.replace("cv32e40p_register_file_ff.sv", "cv32e40p_register_file_latch.sv");
        list = folder.path().join("latch.flist");
        std::fs::write(&list, text).expect("the list is written");
    }
    let bits = counted(&core, &[CV32E40P, own]);
    let arguments = ["-f", list.to_str().expect("a plain path"), "--top", "cv32e40p_top"];
    let scan = scan_in(&[("DESIGN_RTL_DIR", &core.join("rtl"))], &[], &arguments);
    check(&scan, bits, nets, CV32E40P_FINDINGS);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn ibex_with_flip_flops() {
    check_ibex("RegFileFF", &IBEX_FF, false);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn ibex_with_flip_flops_and_assertions() {
    check_ibex("RegFileFF", &IBEX_FF, true);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn ibex_with_a_memory() {
    check_ibex("RegFileFPGA", &IBEX_FPGA, false);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn ibex_with_latches() {
    check_ibex("2", &IBEX_LATCH, false);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn cv32e40p_with_flip_flops() {
    check_cv32e40p(false, &CV32E40P_FF);
}

#[test]
#[ignore = "outside: run tests/outside/run"]
fn cv32e40p_with_latches() {
    check_cv32e40p(true, &CV32E40P_LATCH);
}

/// All on combinational outputs that a clock samples, which is why they are warnings; the register file changes none of them.
/// Why they are right:
///
/// - `data_req_o`, `data_we_o`: the request of a load or store is gated by `illegal_insn`, which gathers the `default` arms of
///   the decoder, true when no other label matches: an instruction bit that leaves one label and enters another makes
///   them pulse. In the state machine of the load-store unit one state bit does the same.
/// - `double_fault_seen_o`: saved causes are decoded from the controller's states and its if-ladder, in which one interrupt
///   makes one condition true and the next one false. No static-1: it is 1 only in the state FLUSH, which lasts one clock.
/// - `data_be_o`, `data_wdata_o`: selected by the two low bits of the address adder. Both change when a carry passes between
///   them, and between 01 and 10 lies 00 or 11, whatever the adder is made of.
/// - `instr_req_o`: `req_i & (fifo_ready | branch_i)`, and one state bit of the controller raises the first and lowers the last.
/// - `instr_addr_o`: a selector of a selector, bits 1 and 0 tied to 0.
/// - `rst_ni`: a port that resets every flip-flop; synchronising its release is for who instantiates the core.
const IBEX_FINDINGS: &[Reviewed] = &[
    ("reconvergent-inversion", "warning", "ibex_top.data_be_o", ALL),
    ("reconvergent-inversion", "warning", "ibex_top.data_req_o", ALL),
    ("reconvergent-inversion", "warning", "ibex_top.data_wdata_o", ALL),
    ("reconvergent-inversion", "warning", "ibex_top.data_we_o", ALL),
    ("reconvergent-inversion", "warning", "ibex_top.double_fault_seen_o", &["dynamic", "static-0"]),
    ("reconvergent-inversion", "warning", "ibex_top.instr_addr_o", ALL),
    ("reconvergent-inversion", "warning", "ibex_top.instr_req_o", ALL),
    ("reset-release", "note", "ibex_top.rst_ni", &[]),
];

/// As [`IBEX_FINDINGS`], with both register files. Why they are right:
///
/// - `irq_ack_o`, `irq_id_o`: the if-ladder of the controller. `debug_mode_q` ends an earlier condition, for entering debug
///   mode, and begins the one for taking the interrupt.
/// - `data_be_o`, `data_wdata_o`: as in ibex.
/// - `data_addr_o`: the plain selector `addr_useincr_ex_i ? operand_a_ex_i + operand_b_ex_i : operand_a_ex_i`.
/// - `instr_addr_o`: the selector of the bus interface behind that of the branch, bits 1 and 0 tied to 0.
/// - `instr_req_o`: `state_q == TRANSPARENT ? trans_valid_i : 1'b1`, written as an if.
/// - `core_sleep_o`: `fetch_enable_q && !clock_en`, and `clock_en` is `fetch_enable_q && ...`.
/// - `rst_ni`: as in ibex.
const CV32E40P_FINDINGS: &[Reviewed] = &[
    ("reconvergent-inversion", "warning", "cv32e40p_top.core_sleep_o", ALL),
    ("reconvergent-inversion", "warning", "cv32e40p_top.data_addr_o", &["static-1"]),
    ("reconvergent-inversion", "warning", "cv32e40p_top.data_be_o", ALL),
    ("reconvergent-inversion", "warning", "cv32e40p_top.data_wdata_o", ALL),
    ("reconvergent-inversion", "warning", "cv32e40p_top.instr_addr_o", ALL),
    ("reconvergent-inversion", "warning", "cv32e40p_top.instr_req_o", &["dynamic", "static-1"]),
    ("reconvergent-inversion", "warning", "cv32e40p_top.irq_ack_o", ALL),
    ("reconvergent-inversion", "warning", "cv32e40p_top.irq_id_o", ALL),
    ("reset-release", "note", "cv32e40p_top.rst_ni", &[]),
];

const ALL: &[&str] = &["dynamic", "static-0", "static-1"];
