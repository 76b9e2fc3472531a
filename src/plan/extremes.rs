//! The loss at its worst over a whole stretch of frequencies, not at samples of it.
//!
//! ln |H(jω)| is a sum of the logarithms of ω's distances from zeros and poles, so it
//! bends over no less than the distance from the nearest. Points are set at half that
//! distance, however narrow a resonance that asks for, and sparsely elsewhere; what is
//! largest among its neighbours is then narrowed down.

use super::optimise::loss_db;
use super::requirements::{Rule, Stretch, Task};
use crate::network::{Circuit, Evaluator, PartValue, Resonance, Resonances};

/// Step from point to point as a share of the distance from the nearest zero or pole.
const OF_DISTANCE: f64 = 0.5;
/// Longest step in a keep band, as a share of the frequency.
const OF_FREQUENCY: f64 = 0.25;
/// Steps over a line's spread.
const OVER_SPREAD: f64 = 8.0;
/// Where a band from 0 Hz takes its first step to, as a share of its end.
const FROM_ZERO: f64 = 1e-3;
/// Next to each edge, at this share of a step, a second point tells which way it goes there.
const PROBE: f64 = 0.01;
/// Share of the fall to the lower neighbour that a curve may rise unseen beside a point.
const UNSEEN: f64 = 0.5;
/// What may be left to narrow down, as a share of the loss, and in decibels.
const LEFT: (f64, f64) = (1e-3, 1e-3);
/// Most times that a place is narrowed down.
const ROUNDS: usize = 8;

/// A circuit, and where its builds have to be looked at.
pub struct Lookout<'a> {
    circuit: &'a Circuit,
    stretches: Vec<Stretch>,
    range_hz: (f64, f64),
    /// The zeros and poles of the nominal circuit that some stretch comes near to.
    known: Resonances,
}

/// Losses at points by rising frequency.
struct Curve<'a> {
    evaluator: &'a Evaluator<'a>,
    hz: Vec<f64>,
    loss_db: Vec<f64>,
}

impl<'a> Lookout<'a> {
    /// For all that the task asks.
    pub fn new(circuit: &'a Circuit, task: &Task) -> Self {
        let stretches = task.stretches();
        let lowest = |stretch: &Stretch| stretch.from_hz.max(FROM_ZERO * stretch.to_hz);
        let range_hz = (
            stretches.iter().map(lowest).fold(f64::INFINITY, f64::min),
            stretches.iter().map(|stretch| stretch.to_hz).fold(0.0, f64::max),
        );
        let mut lookout = Self { circuit, stretches, range_hz, known: Resonances::default() };
        lookout.known = lookout.resonances(&circuit.evaluator(&circuit.values()));
        lookout
    }

    /// The nominal circuit.
    pub fn circuit(&self) -> &Circuit {
        self.circuit
    }

    /// What is asked, in the order in which [`Lookout::worst_db`] answers.
    pub fn stretches(&self) -> &[Stretch] {
        &self.stretches
    }

    /// By stretch the loss of a build that is furthest on the wrong side: the least where
    /// hum is to go down, the largest loss or gain where the signal is kept (a gain negative).
    pub fn worst_db(&self, values: &[PartValue]) -> Vec<f64> {
        self.over_stretches(values, |curve, rule| match rule {
            Rule::Reduce { .. } => curve.lowest_db(),
            Rule::Keep { .. } => curve.furthest_db(),
        })
    }

    /// By stretch the least loss; a gain is negative.
    pub fn least_db(&self, values: &[PartValue]) -> Vec<f64> {
        self.over_stretches(values, |curve, _| curve.lowest_db())
    }

    fn over_stretches(&self, values: &[PartValue], told: impl Fn(&Curve, Rule) -> f64) -> Vec<f64> {
        let evaluator = self.circuit.evaluator(values);
        let steep: Vec<Resonance> = match self.known.is_empty() {
            true => Vec::new(),
            false => {
                let here = evaluator.resonances_from(&self.known);
                here.unwrap_or_else(|| self.resonances(&evaluator)).iter().collect()
            }
        };
        let curve = |stretch: &Stretch| Curve::read(&evaluator, points(stretch, &steep));
        self.stretches.iter().map(|stretch| told(&curve(stretch), stretch.rule)).collect()
    }

    /// All resonances that ask for shorter steps somewhere.
    fn resonances(&self, evaluator: &Evaluator) -> Resonances {
        let mut all = evaluator.resonances(self.range_hz.0, self.range_hz.1);
        all.retain(|resonance| self.stretches.iter().any(|stretch| is_near(&resonance, stretch)));
        all
    }
}

/// Whether a resonance, or one of a build that stands a little elsewhere, asks for shorter
/// steps in the stretch.
fn is_near(resonance: &Resonance, stretch: &Stretch) -> bool {
    /// What the steps of a build may be shorter by.
    const MARGIN: f64 = 1.4;
    let nearest_hz = resonance.frequency_hz.clamp(stretch.from_hz, stretch.to_hz);
    OF_DISTANCE * distance_hz(resonance, nearest_hz) < MARGIN * longest_step_hz(stretch, nearest_hz)
}

fn distance_hz(resonance: &Resonance, hz: f64) -> f64 {
    resonance.half_width_hz.hypot(hz - resonance.frequency_hz)
}

fn longest_step_hz(stretch: &Stretch, hz: f64) -> f64 {
    match stretch.rule {
        Rule::Reduce { .. } => (stretch.to_hz - stretch.from_hz) / OVER_SPREAD,
        Rule::Keep { .. } => OF_FREQUENCY * hz,
    }
}

/// Points over a stretch, its edges and one beside each of them included.
fn points(stretch: &Stretch, steep: &[Resonance]) -> Vec<f64> {
    let (from_hz, to_hz) = (stretch.from_hz, stretch.to_hz);
    if to_hz <= from_hz {
        return vec![from_hz];
    }
    let step_hz = |hz: f64| {
        let steps = steep.iter().map(|resonance| {
            // A step away from a resonance ends further off it, and a step towards it nearer.
            let share = match resonance.frequency_hz > hz {
                true => OF_DISTANCE,
                false => OF_DISTANCE / (1.0 - OF_DISTANCE),
            };
            share * distance_hz(resonance, hz)
        });
        steps.fold(longest_step_hz(stretch, hz), f64::min)
    };
    let beside_hz = |edge_hz: f64| PROBE * step_hz(edge_hz).min(to_hz - from_hz);
    let mut points = vec![from_hz];
    let mut hz = match from_hz > 0.0 {
        true => from_hz + beside_hz(from_hz),
        false => FROM_ZERO * to_hz,
    };
    let last_hz = to_hz - beside_hz(to_hz);
    while hz < last_hz {
        points.push(hz);
        hz += step_hz(hz);
    }
    points.extend([last_hz, to_hz]);
    points
}

impl<'a> Curve<'a> {
    fn read(evaluator: &'a Evaluator<'a>, hz: Vec<f64>) -> Self {
        let mut loss_db = vec![0.0; hz.len()];
        losses_db(evaluator, &hz, &mut loss_db);
        Self { evaluator, hz, loss_db }
    }

    /// The least loss.
    fn lowest_db(&self) -> f64 {
        -self.highest_db(-1.0, f64::NEG_INFINITY)
    }

    /// The largest loss or gain, a gain negative.
    fn furthest_db(&self) -> f64 {
        let most_db = |sign: f64| self.loss_db.iter().map(|loss_db| sign * loss_db).fold(0.0, f64::max);
        let loss_db = self.highest_db(1.0, most_db(-1.0));
        let gain_db = self.highest_db(-1.0, loss_db);
        if gain_db > loss_db { -gain_db } else { loss_db }
    }

    /// The largest of `sign` × the loss, at the points and between them; somewhat less may be
    /// told where it is less than `enough`.
    fn highest_db(&self, sign: f64, enough: f64) -> f64 {
        let mut highest_db =
            self.loss_db.iter().map(|loss_db| sign * loss_db).fold(f64::NEG_INFINITY, f64::max);
        let tops = (1..self.hz.len().max(1) - 1).filter_map(|n| Top::at(self, n, sign));
        let mut tops: Vec<Top> = tops.filter(|top| top.promises(highest_db.max(enough))).collect();
        // The most promising first, so that the others need not be looked into.
        tops.sort_by(|a, b| b.promise_db.total_cmp(&a.promise_db));
        for top in tops {
            highest_db = highest_db.max(top.narrowed(self.evaluator, sign, highest_db.max(enough)));
        }
        highest_db
    }
}

/// A point higher than its neighbours, between them.
struct Top {
    hz: [f64; 3],
    /// `sign` × the loss.
    height_db: [f64; 3],
    /// What may be found between the neighbours.
    promise_db: f64,
}

impl Top {
    /// The one at point `n` of a curve.
    fn at(curve: &Curve, n: usize, sign: f64) -> Option<Self> {
        let height_db = [n - 1, n, n + 1].map(|n| sign * curve.loss_db[n]);
        let is_top = height_db[1] >= height_db[0] && height_db[1] >= height_db[2];
        is_top.then(|| {
            let mut top = Self::of([n - 1, n, n + 1].map(|n| curve.hz[n]), height_db);
            // So far apart, the three tell little of what the curve does between them.
            let fall_db = height_db[1] - height_db[0].min(height_db[2]);
            top.promise_db = top.promise_db.max(height_db[1] + UNSEEN * fall_db);
            top
        })
    }

    fn of(hz: [f64; 3], height_db: [f64; 3]) -> Self {
        /// The curve may rise over its middle point this many times as far as the parabola.
        const PROMISE: f64 = 3.0;
        Self { hz, height_db, promise_db: height_db[1] + PROMISE * over_middle(hz, height_db) }
    }

    /// Whether there may be noticeably more to it.
    fn promises(&self, than_db: f64) -> bool {
        self.promise_db > than_db + LEFT.0 * than_db.abs() + LEFT.1
    }

    /// Its height; that of the best place seen when it no longer promises more than `enough`.
    fn narrowed(mut self, evaluator: &Evaluator, sign: f64, enough: f64) -> f64 {
        for _ in 0..ROUNDS {
            if !self.promises(self.height_db[1].max(enough)) {
                break;
            }
            let [from, middle, to] = self.hz;
            let third = |a: f64, b: f64, thirds: f64| a + (b - a) * thirds / 3.0;
            let between = [
                third(from, middle, 1.0),
                third(from, middle, 2.0),
                third(middle, to, 1.0),
                third(middle, to, 2.0),
            ];
            let mut read = [0.0; 4];
            losses_db(evaluator, &between, &mut read);
            let [a, b, c, d] = read.map(|loss_db| sign * loss_db);
            let hz = [from, between[0], between[1], middle, between[2], between[3], to];
            let height_db = [self.height_db[0], a, b, self.height_db[1], c, d, self.height_db[2]];
            let top = (1..6).max_by(|&a, &b| height_db[a].total_cmp(&height_db[b])).unwrap_or(3);
            let three = |all: [f64; 7]| [all[top - 1], all[top], all[top + 1]];
            self = Self::of(three(hz), three(height_db));
        }
        self.height_db[1]
    }
}

/// How far the parabola through three points, of which the middle one is highest, rises over it.
fn over_middle(x: [f64; 3], y: [f64; 3]) -> f64 {
    let [left, right] = [x[0] - x[1], x[2] - x[1]];
    let [fall_left, fall_right] = [(y[0] - y[1]) / left, (y[2] - y[1]) / right];
    let bend = (fall_right - fall_left) / (right - left);
    let slope = fall_left - bend * left;
    if bend < 0.0 { -slope * slope / (4.0 * bend) } else { 0.0 }
}

/// Insertion losses at some frequencies, decibels, into `out`.
fn losses_db(evaluator: &Evaluator, hz: &[f64], out: &mut [f64]) {
    evaluator.insertion_power_each(hz, out);
    out.iter_mut().for_each(|power| *power = loss_db(*power));
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::network::{Branch, Load, Section, Source, TwoPort};
    use crate::parts::{Part, PartKind};
    use crate::plan::KeepBand;
    use crate::plan::chance::Chance;

    /// A task that keeps these bands and reduces nothing.
    fn keeping(bands: &[(f64, f64)]) -> Task {
        let keep = bands.iter().map(|&(from_hz, to_hz)| KeepBand { from_hz, to_hz, allowed_db: 1.0 });
        Task {
            orders: Vec::new(),
            keep: keep.collect(),
            nominal_hz: 50.0,
            mean_hz: 50.0,
            centre_hz: 50.0,
            spread_hz: 0.2,
            guard_hz: 5.0,
            notes: Vec::new(),
        }
    }

    /// Parts and two-ports as they are drawn.
    struct Drawn {
        chance: Chance,
        parts: Vec<Part>,
    }

    impl Drawn {
        fn decades(&mut self, from: f64, to: f64) -> f64 {
            from * (to / from).powf(self.chance.unit())
        }

        fn add(&mut self, part: Part) -> Branch {
            self.parts.push(part);
            Branch::Part(self.parts.len() - 1)
        }

        fn resistor(&mut self) -> Branch {
            let ohm = self.decades(10.0, 1e5);
            self.add(Part::ideal("R", PartKind::Resistor, ohm))
        }

        /// A tan δ of 0.0005 to 0.005 at 200 Hz.
        fn capacitor(&mut self, farad: f64) -> Branch {
            let loss = self.decades(5e-4, 5e-3);
            let series_resistance_ohm = loss / (std::f64::consts::TAU * 200.0 * farad);
            self.add(Part { series_resistance_ohm, ..Part::ideal("C", PartKind::Capacitor, farad) })
        }

        /// A Q of 5 to 500 at 200 Hz, its own resonance between 1 and 100 kHz.
        fn coil(&mut self, henry: f64) -> Branch {
            let [q, own_hz] = [self.decades(5.0, 500.0), self.decades(1e3, 1e5)];
            self.add(Part {
                series_resistance_ohm: std::f64::consts::TAU * 200.0 * henry / q,
                self_capacitance_f: 1.0 / ((std::f64::consts::TAU * own_hz).powi(2) * henry),
                ..Part::ideal("L", PartKind::Coil, henry)
            })
        }

        /// A coil and a capacitor that resonate between 20 Hz and 5 kHz.
        fn resonant(&mut self) -> [Branch; 2] {
            let [henry, hz] = [self.decades(0.01, 10.0), self.decades(20.0, 5e3)];
            let farad = 1.0 / ((std::f64::consts::TAU * hz).powi(2) * henry);
            [self.coil(henry), self.capacitor(farad)]
        }

        fn stages(&mut self) -> Vec<TwoPort> {
            let series = |series| TwoPort::Series { series };
            let shunt = |shunt| TwoPort::Shunt { shunt };
            match (5.0 * self.chance.unit()) as u32 {
                0 => vec![series(self.resistor()), shunt(Branch::series(self.resonant()))],
                1 => vec![series(Branch::parallel(self.resonant()))],
                2 => {
                    let [coil, capacitor] = self.resonant();
                    vec![series(coil), shunt(capacitor)]
                }
                3 => {
                    let [coil, one] = self.resonant();
                    let Branch::Part(index) = one else { unreachable!("a part") };
                    let farad = self.parts[index].value_si;
                    let middle = vec![series(one), shunt(self.resistor()), series(self.capacitor(farad))];
                    vec![TwoPort::Beside { beside: vec![vec![series(coil)], middle] }]
                }
                _ => {
                    let farad = self.decades(1e-9, 1e-5);
                    vec![series(self.resistor()), shunt(self.capacitor(farad))]
                }
            }
        }
    }

    /// One to four sections between ends from an ohm to a megohm.
    fn drawn_circuit(seed: u64) -> Circuit {
        let mut drawn = Drawn { chance: Chance::new(seed, 0), parts: Vec::new() };
        let source = Source { resistance_ohm: drawn.decades(1.0, 1e5), inductance_h: 0.0 };
        let load =
            Load { resistance_ohm: drawn.decades(10.0, 1e6), capacitance_f: drawn.decades(1e-12, 1e-7) };
        let sections = 1 + (4.0 * drawn.chance.unit()) as usize;
        let stages = (0..sections).flat_map(|_| drawn.stages()).collect();
        Circuit {
            source,
            load,
            sections: vec![Section { kind: "drawn".to_owned(), stages }],
            parts: drawn.parts,
        }
    }

    /// Each part off by up to a tenth.
    fn built(circuit: &Circuit, seed: u64) -> Vec<PartValue> {
        let mut chance = Chance::new(seed, 1);
        let parts = circuit.parts.iter();
        parts.map(|part| PartValue::as_built(part, chance.within(0.1), 20.0)).collect()
    }

    /// The largest |loss| at 6000 points an octave: a third of a thousandth-wide resonance apart,
    /// and then a tenth of that about the highest.
    fn searched_db(evaluator: &Evaluator, from_hz: f64, to_hz: f64) -> f64 {
        let read = |from_hz: f64, to_hz: f64, count: usize| {
            let hz: Vec<f64> =
                (0..=count).map(|n| from_hz * (to_hz / from_hz).powf(n as f64 / count as f64)).collect();
            let mut losses = vec![0.0; hz.len()];
            losses_db(evaluator, &hz, &mut losses);
            (0..hz.len())
                .map(|n| (losses[n].abs(), hz[n]))
                .fold((0.0, from_hz), |a, b| if b.0 > a.0 { b } else { a })
        };
        let count = (6000.0 * (to_hz / from_hz).log2()) as usize;
        let (_, top_hz) = read(from_hz, to_hz, count);
        let step = (to_hz / from_hz).powf(1.0 / count as f64);
        read((top_hz / step).max(from_hz), (top_hz * step).min(to_hz), 40).0
    }

    #[test]
    fn points_rise_from_edge_to_edge_whatever_the_stretch() {
        let rule = Rule::Keep { band: 0, allowed_db: 1.0 };
        let spread = Rule::Reduce { order: 0, target_db: 20.0 };
        let sharp = Resonance { frequency_hz: 100.0, half_width_hz: 1e-3, is_pole: true };
        for (from_hz, to_hz, rule) in [
            (0.0, 12.0, rule),
            (0.0, 1e4, rule),
            (1e-3, 1e5, rule),
            (100.0, 100.1, rule),
            (99.999, 100.0, rule),
            (99.8, 100.2, spread),
        ] {
            let points = points(&Stretch { from_hz, to_hz, rule }, &[sharp]);
            assert_eq!((points[0], points[points.len() - 1]), (from_hz, to_hz));
            assert!(points.windows(2).all(|pair| pair[0] < pair[1]), "{from_hz} to {to_hz}: {points:?}");
            assert!(points.len() < 200, "{} points", points.len());
        }
        assert_eq!(points(&Stretch { from_hz: 50.0, to_hz: 50.0, rule: spread }, &[sharp]), [50.0]);
    }

    #[test]
    fn the_largest_loss_of_any_network_and_of_its_builds_is_found_however_narrow_its_peak() {
        let (mut wrong, mut narrow) = (Vec::new(), 0);
        for seed in 0..600 {
            let circuit = drawn_circuit(seed);
            let mut chance = Chance::new(seed, 2);
            let from_hz = 20.0 * 10f64.powf(2.0 * chance.unit());
            let to_hz = from_hz * 2f64.powf(1.0 + 6.0 * chance.unit());
            let lookout_task = keeping(&[(from_hz, to_hz)]);
            let lookout = Lookout::new(&circuit, &lookout_task);
            narrow += usize::from(lookout.known.iter().any(|resonance| {
                resonance.half_width_hz < 0.002 * resonance.frequency_hz
                    && (from_hz..to_hz).contains(&resonance.frequency_hz)
            }));
            for values in [circuit.values(), built(&circuit, seed)] {
                let found_db = lookout.worst_db(&values)[0].abs();
                let true_db = searched_db(&circuit.evaluator(&values), from_hz, to_hz);
                if (found_db - true_db).abs() > (0.01 * true_db).max(0.02) {
                    wrong.push(format!("network {seed}: {found_db} dB found, {true_db} dB there"));
                }
            }
        }
        assert!(narrow > 80, "only {narrow} networks had a resonance of Q above 250 in the band");
        assert!(wrong.is_empty(), "{}", wrong.join("\n"));
    }
}
