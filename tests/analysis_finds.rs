//! What is taken for hum, and what is not.

mod analysis_signals;

use analysis_signals::{Noise, add_note, assert_finite, hum, run, steady, with_noise};
use notchwright::analysis::{AnalyseOptions, AnalysisError, analyse};
use notchwright::capture::MemoryCapture;

const RATE: u32 = 4000;

#[test]
fn a_missing_fundamental_is_still_counted_from_it() {
    let samples = with_noise(steady(50.03, &[(2, 0.02), (4, 0.01), (6, 0.005)], RATE, 20.0), 0.01, 1);
    let analysis = run(RATE, vec![samples]).analysis;
    assert!((analysis.mains.frequency_hz.expect("found") - 50.03).abs() < 1e-3);
    assert_eq!(analysis.harmonics.iter().map(|h| h.order).collect::<Vec<_>>(), [2, 4, 6]);
    assert!(analysis.causes[0].cause.contains("rectifier"), "{:?}", analysis.causes);
}

#[test]
fn multiples_of_300_hz_alone_are_called_ambiguous() {
    let samples = with_noise(steady(50.0, &[(6, 0.02), (12, 0.01), (18, 0.01)], RATE, 20.0), 0.005, 2);
    let analysis = run(RATE, vec![samples]).analysis;
    assert!(analysis.mains.found);
    assert_eq!(analysis.mains.nominal_hz, None);
    assert!(analysis.notes.iter().any(|note| note.contains("ambiguous")), "{:?}", analysis.notes);
}

#[test]
fn a_steady_island_is_claimed_with_less_confidence_and_a_note() {
    let lines = [(1, 0.05), (3, 0.02), (5, 0.01)];
    let island = run(RATE, vec![with_noise(steady(51.9, &lines, RATE, 20.0), 2e-3, 70)]).analysis;
    assert!((island.mains.frequency_hz.expect("found") - 51.9).abs() < 1e-3);
    assert!((0.5..0.9).contains(&island.mains.confidence), "{:?}", island.mains);
    assert!(
        island.notes.iter().any(|note| note.contains("51.90 Hz is 3.8 % off 50 Hz")),
        "{:?}",
        island.notes
    );
    let grid = run(RATE, vec![with_noise(steady(50.1, &lines, RATE, 20.0), 2e-3, 71)]).analysis;
    assert!(grid.mains.confidence > 0.95, "{:?}", grid.mains);
    assert!(!grid.notes.iter().any(|note| note.contains("island or a generator")), "{:?}", grid.notes);
}

#[test]
fn aircraft_keep_400_hz_and_concert_pitches_are_none() {
    let lines = [(1, 0.05), (3, 0.01)];
    for (frequency_hz, found) in [(401.5, true), (391.995, false), (415.305, false), (440.0, false)] {
        let samples = with_noise(steady(frequency_hz, &lines, RATE, 20.0), 2e-3, 73);
        let mains = run(RATE, vec![samples]).analysis.mains;
        assert_eq!(mains.found, found, "{frequency_hz} Hz: {mains:?}");
    }
}

#[test]
fn a_rate_that_hides_a_supply_says_so_whatever_is_found() {
    let nothing = run(100, vec![with_noise(vec![0.0; 6000], 0.01, 74)]).analysis;
    assert!(!nothing.mains.found);
    assert!(
        nothing.notes.iter().any(|note| note.contains("50 Hz is half the sample rate")),
        "{:?}",
        nothing.notes
    );
    let folded = run(100, vec![with_noise(steady(60.0, &[(1, 0.05)], 100, 60.0), 0.002, 75)]).analysis;
    assert!(folded.notes.iter().any(|note| note.contains("appears at 40.00 Hz")), "{:?}", folded.notes);
}

#[test]
fn low_sample_rates_say_what_folds() {
    for rate in [128, 150, 200] {
        let samples = with_noise(steady(50.02, &[(1, 0.05)], rate, 60.0), 0.005, 5);
        let analysis = run(rate, vec![samples]).analysis;
        let found_hz =
            analysis.mains.frequency_hz.unwrap_or_else(|| panic!("{rate} Hz: {:?}", analysis.mains));
        assert!((found_hz - 50.02).abs() < 2e-3, "{rate} Hz: {found_hz}");
        assert!(!analysis.folding.is_empty(), "{rate} Hz");
    }
    let samples = with_noise(steady(49.9, &[(1, 0.05)], 100, 60.0), 0.002, 6);
    let analysis = run(100, vec![samples]).analysis;
    assert!(analysis.notes.iter().any(|note| note.contains("50 Hz is half the sample rate")), "{analysis:?}");
    let sure = analysis.mains.frequency_se_hz.is_some_and(|se| se < 0.01);
    assert!(!sure, "49.9 and 50.1 Hz cannot be told apart: {:?}", analysis.mains);
}

#[test]
fn a_constant_a_hundred_times_the_hum_does_no_harm() {
    let mut samples = with_noise(steady(50.0, &[(1, 0.005), (3, 0.002)], RATE, 10.0), 1e-4, 8);
    samples.iter_mut().for_each(|x| *x += 0.5);
    let analysis = run(RATE, vec![samples]).analysis;
    assert!((analysis.mains.frequency_hz.expect("found") - 50.0).abs() < 1e-3);
    let first = &analysis.harmonics[0];
    assert!((first.level_dbfs - 20.0 * 0.005f64.log10()).abs() < 0.02, "{first:?}");
    assert!((analysis.captures[0].mean - 0.5).abs() < 1e-3);
}

#[test]
fn clipped_samples_are_counted_and_said() {
    let samples = steady(50.0, &[(1, 2.0)], RATE, 5.0).iter().map(|x| x.clamp(-1.0, 1.0)).collect();
    let analysis = run(RATE, vec![samples]).analysis;
    let share = analysis.captures[0].clipped_samples as f64 / (5.0 * f64::from(RATE));
    assert!((share - 2.0 / 3.0).abs() < 0.02, "{share}");
    assert!(analysis.notes.iter().any(|note| note.contains("clipped")));
}

#[test]
fn clipped_hum_is_found_at_its_frequency() {
    let samples: Vec<f64> =
        steady(50.02, &[(1, 1.6), (3, 0.2)], RATE, 15.0).iter().map(|x| x.clamp(-1.0, 1.0)).collect();
    let analysis = run(RATE, vec![samples]).analysis;
    assert!((analysis.mains.frequency_hz.expect("found") - 50.02).abs() < 1e-4, "{:?}", analysis.mains);
    assert!(analysis.captures[0].clipped_samples > 0);
}

/// Hum through a radio link that loses a tenth of a second to a half, again and again.
fn with_dropouts(seed: u64) -> notchwright::analysis::Analysis {
    let mut noise = Noise::new(90 + seed);
    let mut samples = with_noise(steady(50.02, &[(1, 0.1), (3, 0.03)], RATE, 20.0), 1e-3, seed);
    let mut at_s = noise.between(0.2, 2.0);
    while at_s < 19.0 {
        let length_s = noise.between(0.1, 0.5);
        samples[(at_s * 4000.0) as usize..((at_s + length_s) * 4000.0) as usize].fill(0.0);
        at_s += length_s + noise.between(1.0, 3.0);
    }
    run(RATE, vec![samples]).analysis
}

#[test]
fn dropouts_hide_no_hum() {
    for seed in 0..4 {
        let analysis = with_dropouts(seed);
        let found_hz = analysis.mains.frequency_hz.unwrap_or_else(|| panic!("seed {seed}: {analysis:?}"));
        assert!((found_hz - 50.02).abs() < 1e-3, "seed {seed}: {found_hz}");
        for order in [1, 3] {
            assert!(analysis.harmonics.iter().any(|line| line.order == order), "seed {seed}, order {order}");
        }
    }
}

#[test]
#[ignore = "not met: at seed 2 the splatter of the gaps is listed as order 4"]
fn dropouts_add_no_orders() {
    for seed in 0..4 {
        let orders: Vec<u32> = with_dropouts(seed).harmonics.iter().map(|line| line.order).collect();
        assert_eq!(orders, [1, 3], "seed {seed}");
    }
}

#[test]
fn the_channel_with_the_strongest_hum_is_taken() {
    let quiet = with_noise(steady(50.0, &[(1, 0.001)], RATE, 8.0), 1e-3, 10);
    let loud = with_noise(steady(50.0, &[(1, 0.1)], RATE, 8.0), 1e-3, 11);
    let mut capture = MemoryCapture::new("two", RATE, vec![quiet, loud]);
    let analysis =
        analyse(&mut [&mut capture], &AnalyseOptions::default(), &mut |_| {}).expect("read").analysis;
    assert_eq!(analysis.captures[0].channel, 2);
    let wrong = AnalyseOptions { channel: Some(3), ..AnalyseOptions::default() };
    let error = analyse(&mut [&mut capture], &wrong, &mut |_| {}).expect_err("no such channel");
    assert!(matches!(error, AnalysisError::NoSuchChannel { wanted: 3, channels: 2, .. }));
}

#[test]
fn two_captures_of_one_line_give_one_account() {
    let capture = |frequency_hz: f64, seed: u64| {
        let samples = with_noise(steady(frequency_hz, &[(1, 0.1), (3, 0.02)], 1000, 20.0), 0.005, seed);
        MemoryCapture::new("part", 1000, vec![samples])
    };
    let (mut low, mut high) = (capture(49.95, 20), capture(50.05, 21));
    let run = analyse(&mut [&mut low, &mut high], &AnalyseOptions::default(), &mut |_| {}).expect("read");
    assert_finite(&run);
    let mains = run.analysis.mains;
    assert!((mains.frequency_hz.expect("found") - 50.0).abs() < 1e-3);
    assert!((mains.spread_hz.expect("long") - 0.05).abs() < 5e-3, "{mains:?}");
    assert_eq!(run.analysis.captures.len(), 2);
}

#[test]
fn captures_of_different_supplies_are_not_merged() {
    let capture = |name: &str, frequency_hz: f64, seed: u64| {
        let samples = with_noise(steady(frequency_hz, &[(1, 0.1), (3, 0.02)], 1000, 20.0), 0.005, seed);
        MemoryCapture::new(name, 1000, vec![samples])
    };
    let (mut voice, mut geo) = (capture("voice", 60.0, 22), capture("geo", 50.0, 23));
    let mut again = capture("geo again", 50.1, 24);
    let analysis = analyse(&mut [&mut voice, &mut geo, &mut again], &AnalyseOptions::default(), &mut |_| {})
        .expect("read")
        .analysis;
    assert_eq!(analysis.mains.nominal_hz, Some(50.0));
    assert!((analysis.mains.frequency_hz.expect("found") - 50.05).abs() < 1e-3, "{:?}", analysis.mains);
    let left_out =
        |note: &String| note.starts_with("voice: ") && note.contains("60.00") && note.contains("left out");
    assert!(analysis.notes.iter().any(left_out), "{:?}", analysis.notes);
    assert!(analysis.harmonics.iter().all(|line| (line.frequency_hz / 50.05).fract() < 1e-3), "{analysis:?}");
}

#[test]
fn no_cycle_is_lost_in_a_gap() {
    for (seed, middle_hz, swing_hz) in
        [(77, 50.0, 0.0), (78, 49.93, 0.0), (79, 60.03, 0.02), (80, 50.02, 0.02)]
    {
        let track = analysis_signals::phase_of_wander(middle_hz, swing_hz, 0.03, 60.0);
        let mut samples = hum(&track, &[(1, 0.1)], &[0.5], 400, 60.0);
        samples[28 * 400..31 * 400].fill(0.0);
        let mains = run(400, vec![with_noise(samples, 1e-4, seed)]).analysis.mains;
        let error_hz = mains.frequency_hz.expect("found") - track.mean_frequency_hz();
        let stated_hz = mains.frequency_se_hz.expect("found");
        assert!(error_hz.abs() < 4.0 * stated_hz && stated_hz < 1e-4, "{middle_hz}: {error_hz} in {mains:?}");
        let spread_hz = mains.spread_hz.expect("long");
        assert!((spread_hz - swing_hz).abs() < 4e-3, "{middle_hz} ± {swing_hz}: {mains:?}");
    }
}

#[test]
fn a_second_supply_is_told_apart() {
    let mut samples = with_noise(steady(50.0, &[(1, 0.1), (3, 0.03)], 2000, 20.0), 2e-3, 30);
    let railway = steady(16.68, &[(1, 0.02)], 2000, 20.0);
    samples.iter_mut().zip(&railway).for_each(|(x, r)| *x += r);
    let analysis = run(2000, vec![samples]).analysis;
    assert_eq!(analysis.mains.nominal_hz, Some(50.0));
    let other = analysis.other_supplies.first().unwrap_or_else(|| panic!("{:?}", analysis.mains));
    assert_eq!(other.nominal_hz, 16.7);
    assert!((other.frequency_hz - 16.68).abs() < 5e-3, "{other:?}");
    assert!((other.level_dbfs - 20.0 * 0.02f64.log10()).abs() < 0.2, "{other:?}");
}

#[test]
fn of_two_steady_supplies_the_stronger_is_the_main_one() {
    // Fundamentals alone, and combs that meet at 300 Hz.
    let alone: &[(u32, f64)] = &[(1, 1.0)];
    let comb: &[(u32, f64)] = &[(1, 1.0), (3, 0.3), (5, 0.2), (6, 0.1)];
    for (rate, lines) in [(400, alone), (RATE, comb)] {
        for (strong_hz, weak_hz) in [(50.0, 60.0), (60.0, 50.0)] {
            let of = |hz: f64, gain: f64| {
                let lines: Vec<(u32, f64)> = lines.iter().map(|(k, a)| (*k, a * gain)).collect();
                steady(hz, &lines, rate, 60.0)
            };
            let (strong, weak) = (of(strong_hz, 0.1), of(weak_hz, 0.05));
            let both = strong.iter().zip(&weak).map(|(a, b)| a + b).collect();
            let analysis = run(rate, vec![with_noise(both, 1e-4, 76)]).analysis;
            let mains = &analysis.mains;
            assert_eq!(mains.nominal_hz, Some(strong_hz), "{mains:?}");
            let error_hz = (mains.frequency_hz.expect("found") - strong_hz).abs();
            let stated_hz = mains.frequency_se_hz.expect("found");
            assert!(error_hz < 4.0 * stated_hz && stated_hz < 2e-5, "{error_hz} ± {stated_hz}");
            let other = analysis.other_supplies.first().unwrap_or_else(|| panic!("{mains:?}"));
            assert_eq!(other.nominal_hz, weak_hz);
            assert!((other.frequency_hz - weak_hz).abs() < 2e-5, "{other:?}");
            assert!((other.level_dbfs + 26.02).abs() < 0.1, "{other:?}");
        }
    }
}

#[test]
fn a_struck_bass_note_beside_a_60_hz_comb_is_no_second_supply() {
    // B1 lies within an island's range of 60 Hz; with rests, and legato.
    for (every_s, length_s) in [(1.0, 0.7), (0.5, 0.45), (2.0, 1.6), (0.5, 0.5)] {
        for seed in 0..4 {
            let lines = [(1, 0.02), (3, 0.015), (5, 0.01), (7, 0.005)];
            let mut samples = with_noise(steady(60.009, &lines, RATE, 26.0), 1e-3, 50 + seed);
            let mut at = 0.1 * seed as f64;
            while at + length_s < 26.0 {
                add_note(&mut samples, RATE, at, length_s, 61.735, 0.05);
                at += every_s;
            }
            let analysis = run(RATE, vec![samples]).analysis;
            assert!((analysis.mains.frequency_hz.expect("found") - 60.009).abs() < 2e-3);
            let others = &analysis.other_supplies;
            assert!(others.is_empty(), "{length_s} s of {every_s} s, seed {seed}: {others:?}");
        }
    }
}

#[test]
fn a_second_generator_that_is_really_there_is_named() {
    let mut samples = with_noise(steady(60.0, &[(1, 0.02), (3, 0.015), (5, 0.01)], RATE, 26.0), 1e-3, 60);
    let generator = steady(64.5, &[(1, 0.02), (3, 0.01)], RATE, 26.0);
    samples.iter_mut().zip(&generator).for_each(|(x, g)| *x += g);
    let analysis = run(RATE, vec![samples]).analysis;
    assert!((analysis.mains.frequency_hz.expect("found") - 60.0).abs() < 2e-3);
    let other = analysis.other_supplies.first().unwrap_or_else(|| panic!("{:?}", analysis.mains));
    assert!((other.frequency_hz - 64.5).abs() < 5e-3, "{other:?}");
}

#[test]
fn a_generator_that_wanders_by_hertz_is_followed() {
    let track = analysis_signals::phase_of_wander(49.5, 2.0, 0.02, 60.0);
    let samples = with_noise(hum(&track, &[(1, 0.1), (3, 0.03)], &[0.0, 1.0], 1000, 60.0), 5e-3, 31);
    let mains = run(1000, vec![samples]).analysis.mains;
    let error = mains.frequency_hz.unwrap_or_else(|| panic!("{mains:?}")) - track.mean_frequency_hz();
    assert!(error.abs() < 5e-3, "mean off by {error}: {mains:?}");
    assert!((mains.spread_hz.expect("long") - 2.0).abs() < 0.4, "{mains:?}");
}

#[test]
fn silence_constants_and_scraps_are_no_hum_and_no_crash() {
    let tone = steady(50.0, &[(1, 0.1)], 1000, 0.4);
    for samples in [vec![], vec![0.0; 1], vec![0.3; 7], vec![0.0; 5000], vec![0.3; 5000], tone] {
        let analysis = run(1000, vec![samples]).analysis;
        assert!(!analysis.mains.found, "{:?}", analysis.mains);
        assert!(analysis.causes.is_empty() && analysis.harmonics.is_empty());
    }
    for seconds in [1, 2, 3] {
        let samples = with_noise(steady(50.0, &[(1, 0.1)], 1000, f64::from(seconds)), 1e-3, 9);
        assert!(run(1000, vec![samples]).analysis.mains.found, "{seconds} s");
    }
}
