//! The analyser on a real recording (source and licence: reference/ecg-lead-60hz.md).

use notchwright::analysis::{AnalyseOptions, AnalysisRun, analyse};
use notchwright::capture::MemoryCapture;

fn ecg() -> MemoryCapture {
    let path = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/reference/ecg-lead-60hz.wav");
    let mut reader = hound::WavReader::open(path).expect("the reference recording");
    let rate = reader.spec().sample_rate;
    let samples = reader.samples::<i16>().map(|s| f64::from(s.expect("a sample")) / 32768.0).collect();
    MemoryCapture::new("ecg-lead-60hz.wav", rate, vec![samples])
}

fn analysed(full_scale_v: Option<f64>) -> AnalysisRun {
    let options = AnalyseOptions { full_scale_v, ..AnalyseOptions::default() };
    analyse(&mut [&mut ecg()], &options, &mut |_| {}).expect("analysis")
}

#[test]
fn the_ecg_lead_hums_at_59_985_hz_with_its_second_harmonic() {
    let run = analysed(Some(10.24e-3));
    let mains = &run.analysis.mains;
    println!("{mains:#?}\n{:#?}\n{:#?}", run.analysis.harmonics, run.analysis.causes);
    println!("{:#?} {:#?} {:#?}", run.analysis.notes, run.analysis.folding, run.analysis.other_supplies);
    assert!(mains.found);
    assert_eq!(mains.nominal_hz, Some(60.0));
    let frequency_hz = mains.frequency_hz.expect("found");
    assert!((frequency_hz - 59.985).abs() < 0.005, "{frequency_hz} Hz");
    let orders: Vec<u32> = run.analysis.harmonics.iter().map(|h| h.order).collect();
    assert!(orders.contains(&1) && orders.contains(&2), "{orders:?}");
    assert!(run.analysis.harmonics[0].rms_v.is_some_and(|v| v > 1e-6 && v < 1e-4));
}
