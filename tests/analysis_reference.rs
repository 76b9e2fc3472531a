//! The analyser on real recordings (sources and licences: reference/ecg-lead-60hz.md, reference/seismometer-50hz.md).

use notchwright::analysis::{AnalyseOptions, AnalysisRun, TrackPoint, analyse};
use notchwright::capture::MemoryCapture;

fn recording(name: &str) -> MemoryCapture {
    let path = format!("{}/tests/reference/{name}", env!("CARGO_MANIFEST_DIR"));
    let mut reader = hound::WavReader::open(path).expect("the reference recording");
    let spec = reader.spec();
    let mut channels = vec![Vec::new(); usize::from(spec.channels)];
    for (k, sample) in reader.samples::<i16>().enumerate() {
        channels[k % usize::from(spec.channels)].push(f64::from(sample.expect("a sample")) / 32768.0);
    }
    MemoryCapture::new(name, spec.sample_rate, channels)
}

fn analysed(name: &str, options: &AnalyseOptions) -> AnalysisRun {
    analyse(&mut [&mut recording(name)], options, &mut |_| {}).expect("analysis")
}

#[test]
fn the_ecg_lead_hums_at_59_985_hz_with_its_second_harmonic() {
    let options = AnalyseOptions { full_scale_v: Some(10.24e-3), ..AnalyseOptions::default() };
    let run = analysed("ecg-lead-60hz.wav", &options);
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

/// What a least-squares fit of one sine in pieces of 10 s says of a recording, all channels together.
struct Pieces {
    mean_hz: f64,
    mean_se_hz: f64,
    frequencies_hz: &'static [f64],
    errors_hz: &'static [f64],
}

const PIECE_S: f64 = 10.0;

const THREE_AXES: Pieces = Pieces {
    mean_hz: 49.9605,
    mean_se_hz: 0.0004,
    frequencies_hz: &[49.9949, 49.9771, 49.9591, 49.9535, 49.9472, 49.9410, 49.9508],
    errors_hz: &[0.0010, 0.0011, 0.0011, 0.0009, 0.0018, 0.0010, 0.0010],
};

const ONE_AXIS: Pieces = Pieces {
    mean_hz: 49.9367,
    mean_se_hz: 0.0005,
    frequencies_hz: &[
        49.9781, 49.9767, 49.9633, 49.9510, 49.9348, 49.9317, 49.9289, 49.9319, 49.9349, 49.9346, 49.9282,
        49.9334, 49.9266, 49.9203, 49.9207, 49.9243, 49.9324, 49.9256, 49.9286, 49.9284,
    ],
    errors_hz: &[
        0.0018, 0.0021, 0.0025, 0.0020, 0.0020, 0.0030, 0.0018, 0.0021, 0.0016, 0.0019, 0.0021, 0.0019,
        0.0018, 0.0019, 0.0019, 0.0021, 0.0021, 0.0018, 0.0021, 0.0020,
    ],
};

/// What a least-squares fit in the `index`-th piece would read of a track: the slope of a phase that follows it,
/// which weighs the frequency with a parabola.
fn read_in_piece(track: &[TrackPoint], index: usize) -> f64 {
    let start_s = index as f64 * PIECE_S;
    let (mut sum, mut weights) = (0.0, 0.0);
    for point in track {
        let along = (point.time_s - start_s) / PIECE_S;
        let weight = (along * (1.0 - along)).max(0.0);
        sum += weight * point.frequency_hz;
        weights += weight;
    }
    assert!(weights > 0.0, "no track point in piece {index}");
    sum / weights
}

fn rms(values: &[f64]) -> f64 {
    (values.iter().map(|v| v * v).sum::<f64>() / values.len() as f64).sqrt()
}

/// How far a track lies from the pieces, in errors of the pieces, root mean square.
fn off_pieces(track: &[TrackPoint], pieces: &Pieces) -> f64 {
    let read = (0..pieces.frequencies_hz.len()).map(|k| read_in_piece(track, k));
    let off: Vec<f64> = read
        .zip(pieces.frequencies_hz.iter().zip(pieces.errors_hz))
        .map(|(read_hz, (fitted_hz, error_hz))| (read_hz - fitted_hz) / error_hz)
        .collect();
    println!("track less pieces, in errors: {off:.2?}");
    rms(&off)
}

fn assert_mean_agrees(run: &AnalysisRun, pieces: &Pieces) {
    let mains = &run.analysis.mains;
    assert!(mains.found);
    assert_eq!(mains.nominal_hz, Some(50.0));
    let (frequency_hz, se_hz) = mean(run);
    let off = (frequency_hz - pieces.mean_hz) / se_hz.hypot(pieces.mean_se_hz);
    println!("mean {frequency_hz:.5} ± {se_hz:.5} Hz, {off:.2} errors from the pieces' mean");
    assert!(off.abs() < 3.0, "{frequency_hz} ± {se_hz} Hz");
}

fn mean(run: &AnalysisRun) -> (f64, f64) {
    let mains = &run.analysis.mains;
    (mains.frequency_hz.expect("found"), mains.frequency_se_hz.expect("found"))
}

fn three_axes() -> Vec<AnalysisRun> {
    let axis = |n| AnalyseOptions { channel: Some(n), ..AnalyseOptions::default() };
    (1..=3).map(|n| analysed("seismometer-50hz-three-axes.wav", &axis(n))).collect()
}

/// The differences of two tracks over their stated standard errors; the points of both must be at equal times.
fn differences(a: &AnalysisRun, b: &AnalysisRun) -> Vec<f64> {
    let (a, b) = (&a.analysis.track, &b.analysis.track);
    assert_eq!(a.len(), b.len());
    let difference = |(a, b): (&TrackPoint, &TrackPoint)| {
        assert!((a.time_s - b.time_s).abs() < 1e-9);
        (a.frequency_hz - b.frequency_hz) / a.se_hz.hypot(b.se_hz)
    };
    a.iter().zip(b).map(difference).collect()
}

/// The mean of several tracks, each point weighted by its standard error.
fn joint_track(runs: &[AnalysisRun]) -> Vec<TrackPoint> {
    let at = |k: usize| runs.iter().map(move |run| &run.analysis.track[k]);
    let joint = |k: usize| {
        let weight: f64 = at(k).map(|p| p.se_hz.powi(-2)).sum();
        let frequency_hz = at(k).map(|p| p.frequency_hz * p.se_hz.powi(-2)).sum::<f64>() / weight;
        TrackPoint { time_s: runs[0].analysis.track[k].time_s, frequency_hz, se_hz: weight.powf(-0.5) }
    };
    (0..runs[0].analysis.track.len()).map(joint).collect()
}

#[test]
fn a_seismometer_axis_hums_as_an_independent_fit_finds() {
    let run = analysed("seismometer-50hz-one-axis.wav", &AnalyseOptions::default());
    assert_mean_agrees(&run, &ONE_AXIS);
    assert!(off_pieces(&run.analysis.track, &ONE_AXIS) < 1.5);
}

#[test]
fn three_axes_of_a_seismometer_hum_as_an_independent_fit_finds() {
    let runs = three_axes();
    for run in &runs {
        assert_mean_agrees(run, &THREE_AXES);
    }
    assert!(off_pieces(&joint_track(&runs), &THREE_AXES) < 1.5);
}

#[test]
fn three_axes_of_a_seismometer_agree_on_the_mean_within_their_stated_errors() {
    let means: Vec<(f64, f64)> = three_axes().iter().map(mean).collect();
    let weight: f64 = means.iter().map(|(_, se_hz)| se_hz.powi(-2)).sum();
    let joint_hz = means.iter().map(|(f_hz, se_hz)| f_hz * se_hz.powi(-2)).sum::<f64>() / weight;
    let chi_square: f64 = means.iter().map(|(f_hz, se_hz)| ((f_hz - joint_hz) / se_hz).powi(2)).sum();
    println!("{means:?}: joint {joint_hz:.5} ± {:.5} Hz, chi-square {chi_square:.2}", weight.powf(-0.5));
    // Two degrees of freedom: by chance one time in a hundred.
    assert!(chi_square < 9.21, "{chi_square}");
}

#[test]
fn three_axes_of_a_seismometer_follow_one_wander_within_their_stated_errors() {
    let runs = three_axes();
    let pairs = [(0, 1), (0, 2), (1, 2)].map(|(a, b)| differences(&runs[a], &runs[b]));
    let each = pairs.each_ref().map(|pair| rms(pair));
    let all = rms(&pairs.concat());
    println!("differences over their errors: {each:.3?}, all {all:.3}");
    // Synthetic channels of one wander show 0.3 to 0.9 a pair, some 15 independent points each; see the .md.
    assert!(each.iter().all(|&pair| pair < 1.2), "{each:?}");
    assert!(all > 0.5, "the errors are stated too large: {all}");
    // That they agree says something only as far as there is wander to agree on.
    for run in &runs {
        let mains = &run.analysis.mains;
        assert!(mains.spread_hz.expect("found") > 3.0 * mains.spread_floor_hz.expect("found"), "{mains:?}");
    }
}
