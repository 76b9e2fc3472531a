//! Weighting curves of hearing: A and ITU-R BS.468-4.

/// A-weighting in decibels, 0 at 1 kHz: the analytical form of IEC 61672-1,
/// poles at 20.60, 107.7, 737.9 and 12 194 Hz (from memory).
pub fn a_weighting_db(frequency_hz: f64) -> f64 {
    let squared = frequency_hz * frequency_hz;
    let pole = |hz: f64| squared + hz * hz;
    let (f1, f2, f3, f4) = (20.598_997, 107.652_65, 737.862_23, 12_194.217);
    let gain = f4 * f4 * squared * squared / (pole(f1) * (pole(f2) * pole(f3)).sqrt() * pole(f4));
    20.0 * gain.log10() + 2.0
}

/// ITU-R BS.468-4 weighting in decibels, 0 at 1 kHz: the response of the network
/// that the recommendation draws, as a rational function (from memory).
pub fn bs468_weighting_db(frequency_hz: f64) -> f64 {
    let f = frequency_hz;
    let f2 = f * f;
    let even = 1.0
        + f2 * (-1.363_894_795_463_638e-7
            + f2 * (2.043_828_333_606_125e-15 - f2 * 4.737_338_981_378_384e-24));
    let odd =
        f * (5.559_488_023_498_642e-4 + f2 * (-2.118_150_887_518_656e-11 + f2 * 1.306_612_257_412_824e-19));
    18.2 + 20.0 * (1.246_332_637_532_143e-4 * f / even.hypot(odd)).log10()
}

/// Level of several lines together under a weighting: powers add.
/// `lines` are (frequency in hertz, level in dBFS).
pub fn weighted_level_dbfs(lines: &[(f64, f64)], weighting_db: fn(f64) -> f64) -> f64 {
    let power: f64 = lines
        .iter()
        .map(|&(frequency_hz, dbfs)| 10_f64.powf((dbfs + weighting_db(frequency_hz)) / 10.0))
        .sum();
    10.0 * power.max(1e-40).log10()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_weighting_has_the_values_of_its_table() {
        // IEC 61672-1, values from memory.
        let table = [
            (31.5, -39.4),
            (50.0, -30.2),
            (63.0, -26.2),
            (100.0, -19.1),
            (125.0, -16.1),
            (250.0, -8.6),
            (500.0, -3.2),
            (1000.0, 0.0),
        ];
        for (nominal_hz, expected) in table {
            // The table is for exact mid-bands, its first column for the eye.
            let exact_hz = 10_f64.powf((10.0 * f64::log10(nominal_hz)).round() / 10.0);
            let got = a_weighting_db(exact_hz);
            assert!((got - expected).abs() < 0.06, "{nominal_hz} Hz: {got} dB for {expected} dB");
        }
    }

    #[test]
    fn bs468_weighting_has_the_values_of_its_table() {
        // ITU-R BS.468-4, values from memory.
        let table = [
            (31.5, -29.9),
            (63.0, -23.9),
            (100.0, -19.8),
            (200.0, -13.8),
            (400.0, -7.8),
            (1000.0, 0.0),
            (6300.0, 12.2),
            (10_000.0, 8.1),
        ];
        for (hz, expected) in table {
            let got = bs468_weighting_db(hz);
            assert!((got - expected).abs() < 0.1, "{hz} Hz: {got} dB for {expected} dB");
        }
    }

    #[test]
    fn two_equal_lines_stand_3_db_over_one() {
        let flat = |_: f64| 0.0;
        let both = weighted_level_dbfs(&[(50.0, -60.0), (150.0, -60.0)], flat);
        assert!((both + 56.99).abs() < 0.01, "{both}");
    }
}
