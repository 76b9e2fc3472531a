//! The twin-T: R, 2C, R beside C, R/2, C; a notch without coils.

use std::f64::consts::{FRAC_1_SQRT_2, TAU};

use num_complex::Complex64;

use super::{Bench, Draft, Kind, NaturalTrim, Notch, Setting, SlotValue, series, shunt};
use crate::network::TwoPort;
use crate::parts::CoilLine;

/// ω₀ = 1/RC; Q = 1/4 from a zero source into an open (Tuttle, Proc. IRE 28,
/// 1940). With R = √(2R_sR_l) the loss far below and far above is the same.
///
/// In general, of series R₁, R₂ with C₃ to ground and series C₁, C₂ with R₃ to
/// ground, the null asks for ω²C₁C₂R₃(R₁ + R₂) = 1 and ω²R₁R₂C₃(C₁ + C₂) = 1.
pub struct TwinT;

impl Kind for TwinT {
    fn name(&self) -> &'static str {
        "twin-T"
    }

    fn drafts(&self, setting: &Setting, _coils: &[CoilLine]) -> Vec<Draft> {
        let [line] = setting.lines[..] else { return Vec::new() };
        // Wherever the keep bands lie on one side only, more is gained by going
        // off the symmetrical value; the search does, from here.
        let symmetrical_ohm = (2.0 * setting.source_ohm * setting.load_ohm).sqrt();
        let clear_of_source_ohm = 2.0 * setting.source_ohm;
        let clear_of_load_ohm = 0.2 * setting.load_ohm.min(1e7);
        // Between source and load that are near each other there is no value clear of both.
        let resistance_ohm = if clear_of_source_ohm < clear_of_load_ohm {
            symmetrical_ohm.clamp(clear_of_source_ohm, clear_of_load_ohm)
        } else {
            symmetrical_ohm
        };
        let capacitance_f = 1.0 / (TAU * line.frequency_hz * resistance_ohm);
        if !setting.may_have_capacitance(capacitance_f) {
            return Vec::new();
        }
        let mut bench = Bench::default();
        let r1 = bench.resistor(setting.free_resistance(resistance_ohm));
        let r2 = bench.tied_resistor(1.0);
        let r3 = bench.tied_resistor(0.5);
        let c1 = bench.capacitor(setting.free_capacitance(capacitance_f));
        let c2 = bench.tied_capacitor(1.0);
        let c3 = bench.tied_capacitor(2.0);
        let stage = TwoPort::Beside {
            beside: vec![vec![series(r1), shunt(c3), series(r2)], vec![series(c1), shunt(r3), series(c2)]],
        };
        let mut draft = bench.draft(self, setting, vec![stage]);
        draft.trims.push(NaturalTrim {
            slot: 2,
            order: line.order,
            makes_up_for: vec![(0, 0.5), (1, 0.5), (3, 1.0), (4, 1.0)],
        });
        draft.trims.push(NaturalTrim {
            slot: 5,
            order: line.order,
            makes_up_for: vec![(0, 1.0), (1, 1.0), (3, 0.5), (4, 0.5)],
        });
        vec![draft]
    }

    fn notches(&self, values: &[SlotValue], source_ohm: f64, load_ohm: f64) -> Vec<Notch> {
        let [r1, r2, _, c1, c2, _] = values else { return Vec::new() };
        let resistance_ohm = (r1.value_si * r2.value_si).sqrt();
        let capacitance_f = (c1.value_si * c2.value_si).sqrt();
        vec![Notch {
            frequency_hz: 1.0 / (TAU * resistance_ohm * capacitance_f),
            q: loaded_q(resistance_ohm, source_ohm, load_ohm),
            depth_db: None,
        }]
    }

    fn is_single_notch(&self) -> bool {
        true
    }
}

/// Loaded Q of the symmetrical twin-T of R between R_s and R_l.
///
/// In units of 1/R, with s = jx: y₂₁ = −(1 + s²)/(2(1 + s)) and
/// y₁₁ = y₂₂ = (1 + 4s + s²)/(2(1 + s)). Near the null |y₂₁| = |x − 1|/√2, and
/// H = −y₂₁/(y₂₂ + Y_l + R_s(Δy + y₁₁Y_l)) with y₁₁ = 1 + j and Δy = y₁₁². A
/// single notch runs as flat·2Q|x − 1|; where the flat levels below and above
/// differ, their geometric mean stands for it.
fn loaded_q(resistance_ohm: f64, source_ohm: f64, load_ohm: f64) -> f64 {
    let (s, l) = (source_ohm / resistance_ohm, resistance_ohm / load_ohm);
    let y = Complex64::new(1.0, 1.0);
    let slope = FRAC_1_SQRT_2 / (y + l + s * (y * y + y * l)).norm();
    let below = 1.0 / (1.0 + (2.0 + s) * l);
    let above = 1.0 / (1.0 + s * (4.0 + l));
    slope / (2.0 * (below * above).sqrt())
}
