//! What `confidence` says: of the finds with a confidence c, at least about a share c is right.

mod analysis_signals;

use analysis_signals::{Noise, music, power, run, speech, speech_like_noise, steady, trials, with_noise};

const RATE: u32 = 2000;

/// A find of confidence ½ or more, or none, and whether it is true.
struct Answer {
    confidence: f64,
    is_right: bool,
}

/// One recording of a mixed population: noise, voices or music, half of the recordings with hum
/// from far under what can be found to well over it.
fn answer(seed: u64) -> Answer {
    let mut draw = Noise::new(4000 + seed);
    let duration_s = [8.0, 15.0, 30.0][(seed / 4 % 3) as usize];
    let (programme, from_db, to_db) = match seed % 4 {
        0 => (music(RATE, duration_s, seed), -35.0, -5.0),
        1 => (speech(RATE, duration_s, seed), -45.0, -15.0),
        2 => (speech_like_noise(RATE, duration_s, seed), -45.0, -15.0),
        _ => (with_noise(vec![0.0; (duration_s * f64::from(RATE)) as usize], 0.1, seed), -35.0, -15.0),
    };
    let programme = with_noise(programme, 3e-4, seed);
    let hums = draw.uniform() < 0.5;
    let (nominal_hz, db) = (if draw.uniform() < 0.5 { 50.0 } else { 60.0 }, draw.between(from_db, to_db));
    let frequency_hz = nominal_hz * draw.between(0.99, 1.01);
    let lines: &[(u32, f64)] = match (draw.uniform() * 3.0) as u32 {
        0 => &[(1, 1.0)],
        1 => &[(1, 1.0), (3, 0.4), (5, 0.2), (7, 0.1)],
        _ => &[(2, 1.0), (4, 0.5), (6, 0.2)],
    };
    let line = steady(frequency_hz, lines, RATE, duration_s);
    let gain = if hums { (power(&programme) / power(&line)).sqrt() * 10f64.powf(db / 20.0) } else { 0.0 };
    let samples = programme.iter().zip(&line).map(|(p, h)| p + gain * h).collect();
    let mains = run(RATE, vec![samples]).analysis.mains;
    let is_right = match mains.frequency_hz {
        Some(found_hz) => hums && (found_hz / frequency_hz - 1.0).abs() < 2e-3,
        None => !hums,
    };
    Answer { confidence: mains.confidence, is_right }
}

#[test]
fn finds_are_right_at_least_as_often_as_their_confidence_says() {
    let answers: Vec<Answer> = (0..trials(80)).map(answer).collect();
    println!("confidence   finds  right  mean confidence");
    for (from, to) in [(0.5, 0.7), (0.7, 0.9), (0.9, 0.99), (0.99, 1.01)] {
        let inside: Vec<&Answer> =
            answers.iter().filter(|answer| (from..to).contains(&answer.confidence)).collect();
        let count = inside.len() as f64;
        let right = inside.iter().filter(|answer| answer.is_right).count() as f64;
        let stated: f64 = inside.iter().map(|answer| answer.confidence).sum();
        println!("{from:.2} to {:.2} {count:6} {:6.2} {:6.2}", to.min(1.0), right / count, stated / count);
        // Chance alone strays by a standard deviation; of one find no share can be told.
        let strays = inside.iter().map(|a| a.confidence * (1.0 - a.confidence)).sum::<f64>().sqrt();
        assert!(
            right >= stated - 2.0 * strays - 1.0,
            "{from} to {to}: {right} of {count}, {stated:.1} stated"
        );
    }
    let silent: Vec<&Answer> = answers.iter().filter(|answer| answer.confidence < 0.5).collect();
    let right = silent.iter().filter(|answer| answer.is_right).count();
    println!("under 0.50   {:6} of which {right} without hum", silent.len());
    assert!(answers.iter().filter(|answer| answer.confidence >= 0.5).count() > answers.len() / 5);
}
