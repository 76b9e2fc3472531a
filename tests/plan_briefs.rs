//! Plans for whole briefs: what is met, what is not and why, and what every plan owes.

use std::path::Path;

use notchwright::analysis::{Analysis, Harmonic, Mains};
use notchwright::network::{Load, Source};
use notchwright::parts::Stock;
use notchwright::plan::{Centre, KeepBand, LineBrief, Plan, PlanOptions, ReductionTarget, plan};

/// The list that goes with the examples: coils to 10 H with Q about 10 at 50 Hz.
fn bench_stock() -> Stock {
    Stock::read(Path::new("examples/bench-stock.yaml")).expect("the example list")
}

fn findings(nominal_hz: f64, levels_dbfs: &[(u32, f64)]) -> Analysis {
    Analysis {
        captures: Vec::new(),
        mains: Mains {
            found: true,
            nominal_hz: Some(nominal_hz),
            frequency_hz: Some(nominal_hz + 0.012),
            frequency_se_hz: Some(1e-4),
            spread_hz: Some(0.03),
            spread_floor_hz: Some(0.001),
            confidence: 0.99,
        },
        harmonics: levels_dbfs
            .iter()
            .map(|&(order, level_dbfs)| Harmonic {
                order,
                frequency_hz: f64::from(order) * (nominal_hz + 0.012),
                level_dbfs,
                rms_v: None,
                phase_deg: 0.0,
                over_floor_db: 60.0,
            })
            .collect(),
        track: Vec::new(),
        causes: Vec::new(),
        other_supplies: Vec::new(),
        folding: Vec::new(),
        notes: Vec::new(),
    }
}

fn tide_gauge() -> (Analysis, LineBrief) {
    let analysis = findings(50.0, &[(1, -30.0), (3, -42.0), (5, -55.0)]);
    let brief = LineBrief {
        line: "Sluice house tide gauge, pressure cell 2".into(),
        full_scale_v: 2.0,
        source: Source { resistance_ohm: 350.0, inductance_h: 0.0 },
        load: Load { resistance_ohm: 1e6, capacitance_f: 220e-12 },
        keep: vec![KeepBand { from_hz: 0.0, to_hz: 12.0, allowed_db: 0.5 }],
        target: ReductionTarget::ReduceByDb(40.0),
        orders: Some(vec![1, 3]),
        allow_hz: 0.2,
        guard_hz: 5.0,
        centre: Centre::Nominal,
        temperature_from_c: 10.0,
        temperature_to_c: 35.0,
        stock: None,
    };
    (analysis, brief)
}

fn rehearsal_room() -> (Analysis, LineBrief) {
    let levels: Vec<(u32, f64)> = (1..=12).map(|order| (order, -30.0 - 2.0 * f64::from(order))).collect();
    let brief = LineBrief {
        line: "Rehearsal room, stage box to desk".into(),
        full_scale_v: 2.0,
        source: Source { resistance_ohm: 600.0, inductance_h: 0.0 },
        load: Load { resistance_ohm: 20e3, capacitance_f: 1e-9 },
        keep: vec![KeepBand { from_hz: 40.0, to_hz: 15e3, allowed_db: 1.0 }],
        target: ReductionTarget::ReduceByDb(20.0),
        orders: Some((1..=12).collect()),
        ..tide_gauge().1
    };
    (findings(60.0, &levels), brief)
}

/// Three odd harmonics inside a music band.
fn example_room() -> (Analysis, LineBrief) {
    let brief = LineBrief {
        load: Load { resistance_ohm: 10e3, capacitance_f: 1e-9 },
        keep: vec![KeepBand { from_hz: 80.0, to_hz: 15e3, allowed_db: 3.0 }],
        orders: Some(vec![1, 2, 3]),
        guard_hz: 15.0,
        temperature_from_c: 15.0,
        temperature_to_c: 30.0,
        ..rehearsal_room().1
    };
    (rehearsal_room().0, brief)
}

fn planned((analysis, brief): &(Analysis, LineBrief), stock: &Stock) -> Plan {
    plan(analysis, brief, stock, &PlanOptions::default(), &mut |_| {}).expect("a plan")
}

fn show(plan: &Plan) {
    for design in std::iter::once(&plan.design).chain(&plan.alternatives) {
        println!("{} met {} {:.1} %", design.summary, design.met, design.builds.meeting_pct);
        for part in &design.circuit.parts {
            print!("  {} {} {:?};", part.reference, part.value, part.setting_ohm);
        }
        println!();
        for p in &design.predicted {
            print!("  order {} {:.2} worst {:.2};", p.order, p.reduction_db, p.reduction_worst_db);
        }
        for k in &design.keep {
            print!("  keep {}-{} {:.3} worst {:.3};", k.from_hz, k.to_hz, k.loss_db, k.loss_worst_db);
        }
        println!();
        for t in &design.trims {
            println!(
                "  {} {} {:.2} Hz {:.3e}..{:.3e} residue {:.4}",
                t.method, t.part, t.frequency_hz, t.from_si, t.to_si, t.residue
            );
        }
    }
    println!("{:?}", plan.q_windows);
    println!("{:?}", plan.obstacles);
}

#[test]
fn the_tide_gauge_brief_is_met_by_what_the_drawer_holds() {
    let plan = planned(&tide_gauge(), &bench_stock());
    show(&plan);
    assert!(plan.design.met);
    assert!(plan.design.builds.meeting_pct >= 95.0);
}

#[test]
fn twelve_harmonics_inside_a_music_band_are_answered_with_the_nearest_and_what_stands_in_the_way() {
    let plan = planned(&rehearsal_room(), &bench_stock());
    show(&plan);
    assert!(!plan.design.met);
}

#[test]
#[ignore]
fn timing() {
    for (name, brief) in [("tide", tide_gauge()), ("room", rehearsal_room()), ("example", example_room())] {
        let start = std::time::Instant::now();
        let plan = plan(&brief.0, &brief.1, &bench_stock(), &PlanOptions::default(), &mut |share| {
            println!("{name} {share} {:.3}", start.elapsed().as_secs_f64())
        })
        .expect("a plan");
        show(&plan);
        println!("{name} done {:.3}", start.elapsed().as_secs_f64());
    }
}
