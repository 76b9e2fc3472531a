//! The search: kinds, coils and cascades sifted, the best of them made from the list.

use rayon::prelude::*;

use super::assembly::Assembly;
use super::chance::variations;
use super::design::Design;
use super::finish::{Finished, design, finished, rejudged};
use super::nearest;
use super::optimise::{Point, Problem, QUICK, THOROUGH, Variation};
use super::requirements::{COARSE, Lean, Rule, Sample, Task, samples};
use super::round::{Pairs, rounded};
use super::shelf::{Shelf, slot_kind};
use super::trim::adjustable;
use crate::network::kinds::{Draft, KINDS, Line, Setting};
use crate::network::{Circuit, Load, Source};
use crate::parts::PartKind;

/// Most sections in a cascade.
pub const MOST_SECTIONS: usize = 3;
/// Builds drawn for sifting.
const SIFTING_BUILDS: usize = 3;
/// Builds drawn for choosing values.
const CHOOSING_BUILDS: usize = 16;
/// Networks of the same kinds, different in number of parts, that are looked into.
const ALIKE: usize = 6;
/// Networks that are made from the list and built.
const MADE: usize = 10;
/// The same, in a search that leans to one side.
const MADE_LEANING: usize = 5;
/// Networks made before the searches that lean to one side, where all are hopeless.
const MADE_HOPELESS: usize = 1;
/// Builds drawn of what does not meet the brief, to tell which is the nearest.
const RANKING_BUILDS: u32 = 150;
/// Up to this many values, pairs of capacitors are tried one place at a time.
const FEW: usize = 5;

/// A network of more free values than this is large: few of them are made.
const LARGE: usize = 9;
/// Large networks that are made from the list.
const LARGE_MADE: usize = 3;
/// Worst miss, in units, from which finer values do not help.
const HOPELESS: f64 = 3.0;

/// What the search is given.
pub struct Search<'a> {
    /// What is asked.
    pub task: &'a Task,
    /// What can be bought.
    pub shelf: &'a Shelf<'a>,
    /// What drives the line and what it feeds.
    pub ends: (Source, Load),
    /// Coldest and warmest, °C.
    pub temperature_c: (f64, f64),
    /// Builds drawn for each made network.
    pub builds: u32,
    /// Seed of all draws.
    pub seed: u64,
    /// What it holds to first where not all can be had.
    pub lean: Lean,
}

/// A cascade with values, as far as it was sifted.
#[derive(Clone)]
pub struct Candidate {
    /// The network.
    pub assembly: Assembly,
    /// Its drafts, to be cascaded further.
    drafts: Vec<Draft>,
    /// Its values.
    pub point: Point,
    /// Whether its values count on trims.
    pub trimmed: bool,
}

impl Candidate {
    /// Kinds from the source on, `shunt trap + low-pass`.
    pub fn signature(&self) -> String {
        let kinds: Vec<&str> = self.drafts.iter().map(|draft| draft.kind).collect();
        kinds.join(" + ")
    }

    /// Orders that its sections deal with.
    pub fn orders(&self) -> Vec<u32> {
        let mut orders: Vec<u32> = self.drafts.iter().flat_map(|draft| draft.covers.clone()).collect();
        orders.sort_unstable();
        orders.dedup();
        orders
    }

    /// Builds drawn for choosing its values: fewer where each costs much.
    fn choosing_builds(&self) -> usize {
        if self.assembly.freedoms.len() > LARGE { CHOOSING_BUILDS / 4 } else { CHOOSING_BUILDS }
    }

    /// Labour and parts: a coil weighs four parts, a trim three.
    fn effort(&self) -> f64 {
        let trims = if self.trimmed { self.assembly.trims.len() } else { 0 };
        self.assembly.slots.len() as f64 + 3.0 * self.assembly.coils() as f64 + 3.0 * trims as f64
    }
}

/// A network made from the list, built and judged.
pub struct Made {
    /// The design.
    pub design: Design,
    /// The worst miss that 95 % of builds stay below.
    pub worst_miss: f64,
}

impl Made {
    /// Effort of the finished thing: parts, coils four times, trims three times.
    pub fn effort(&self) -> f64 {
        let parts = &self.design.circuit.parts;
        let coils = parts.iter().filter(|part| part.kind == PartKind::Coil).count();
        parts.len() as f64 + 3.0 * coils as f64 + 3.0 * self.design.trims.len() as f64
    }
}

impl Search<'_> {
    /// All networks worth making, made, built and judged, best first.
    pub fn run(&self, progress: &mut dyn FnMut(f64)) -> Vec<Made> {
        let Some(setting) = self.setting(&self.orders()) else { return Vec::new() };
        let sifted = self.sifted(&setting);
        progress(0.3);
        let mut finalists = self.finalists(sifted);
        if self.lean != Lean::Hum && finalists.iter().all(|candidate| candidate.point.worst > 0.0) {
            finalists.extend(self.partial(&setting));
        }
        progress(0.5);
        let mut made: Vec<Made> =
            finalists.par_iter().flat_map_iter(|candidate| self.made(candidate)).collect();
        progress(0.9);
        made.sort_by(better);
        made
    }

    /// Where nothing meets the brief: the searches that hold to the signal first,
    /// and to the targets first, put together with what was made; the nearest first.
    pub fn run_leaning(&self, mut made: Vec<Made>, progress: &mut dyn FnMut(f64)) -> Vec<Made> {
        for (turn, lean) in [Lean::Signal, Lean::Hum].into_iter().enumerate() {
            made.extend(Search { lean, ..*self }.run(&mut |_| {}));
            progress(0.6 + 0.2 * turn as f64);
        }
        nearest::sorted(made)
    }

    /// The design of a circuit without parts.
    pub fn of_nothing(&self, circuit: Circuit) -> Design {
        let finished = Finished { circuit, trims: Vec::new(), sections: Vec::new(), failing: Vec::new() };
        design(finished, self.task, self.temperature_c, 1, self.seed).0
    }

    /// All builds of a design of which fewer were drawn.
    pub fn with_all_builds(&self, design: Design) -> Design {
        match design.builds.count < self.builds {
            true => rejudged(design, self.task, self.temperature_c, self.builds, self.seed),
            false => design,
        }
    }

    /// All orders to be reduced.
    pub fn orders(&self) -> Vec<u32> {
        self.task.orders.iter().map(|order| order.order).collect()
    }

    /// Where not all orders can be reduced: networks for the lowest few of them.
    fn partial(&self, setting: &Setting) -> Vec<Candidate> {
        let orders: Vec<u32> = setting.lines.iter().map(|line| line.order).collect();
        let mut counts = vec![1, 2, 3, orders.len() / 2];
        counts.retain(|&count| count >= 1 && count < orders.len());
        counts.dedup();
        let mut all = Vec::new();
        for count in counts {
            let Some(setting) = self.setting(&orders[..count]) else { continue };
            let drafts = self.drafts(&setting).into_iter().map(|draft| vec![draft]).collect();
            let mut sifted = self.sift(drafts, &orders[..count]);
            sifted.truncate(2);
            all.extend(sifted.into_iter().map(|candidate| self.chosen(candidate, true)));
        }
        all
    }

    /// What a section for these orders is to do; `None` where the list holds no
    /// capacitors or no resistors.
    fn setting(&self, orders: &[u32]) -> Option<Setting> {
        let lines: Vec<Line> = self
            .task
            .orders
            .iter()
            .filter(|order| orders.contains(&order.order))
            .map(|order| Line {
                order: order.order,
                frequency_hz: order.centre_hz,
                target_db: order.target_db,
            })
            .collect();
        let lowest_hz = lines.first()?.frequency_hz;
        let judged: Vec<(f64, f64)> = self.task.keep.iter().flat_map(|band| self.task.judged(band)).collect();
        let kept_below_hz =
            judged.iter().filter(|band| band.0 < lowest_hz).map(|band| band.1).reduce(f64::max);
        let kept_above_hz =
            judged.iter().filter(|band| band.1 > lowest_hz).map(|band| band.0).reduce(f64::min);
        Some(Setting {
            source_ohm: self.ends.0.resistance_ohm.max(1.0),
            load_ohm: self.ends.1.resistance_ohm,
            lines,
            kept_below_hz: kept_below_hz.map(|hz| hz.min(lowest_hz)),
            kept_above_hz: kept_above_hz.map(|hz| hz.max(lowest_hz)),
            keeps_dc: judged.iter().any(|band| band.0 == 0.0),
            capacitance_f: self.shelf.capacitance_f()?,
            resistance_ohm: self.shelf.resistance_ohm()?,
        })
    }

    fn drafts(&self, setting: &Setting) -> Vec<Draft> {
        KINDS.iter().flat_map(|kind| kind.drafts(setting, &self.shelf.stock().coils)).collect()
    }

    /// Samples of some orders and of all keep bands.
    fn samples_for(&self, orders: &[u32]) -> Vec<Sample> {
        let mut all = samples(self.task, COARSE);
        all.retain(|sample| match sample.rule {
            Rule::Reduce { order, .. } => orders.contains(&self.task.orders[order].order),
            Rule::Keep { .. } => true,
        });
        let lines_hz: Vec<f64> = self.task.orders.iter().map(|order| order.centre_hz).collect();
        all.into_iter().map(|sample| self.lean.weighed(sample, &lines_hz)).collect()
    }

    fn loss_hz(&self) -> f64 {
        self.task.orders.first().map_or(self.task.centre_hz, |order| order.centre_hz)
    }

    /// Cascades of up to three sections, each with values from a quick search.
    fn sifted(&self, setting: &Setting) -> Vec<Candidate> {
        let orders: Vec<u32> = setting.lines.iter().map(|line| line.order).collect();
        let whole: Vec<Vec<Draft>> = self.drafts(setting).into_iter().map(|draft| vec![draft]).collect();
        let mut complete = self.sift(whole, &orders);
        let mut singles: Vec<Candidate> = Vec::new();
        if orders.len() > 1 {
            for &order in orders.iter().take(MOST_SECTIONS) {
                let Some(setting) = self.setting(&[order]) else { continue };
                let drafts = self.drafts(&setting).into_iter().map(|draft| vec![draft]).collect();
                let mut sifted = self.sift(drafts, &[order]);
                best_of_each_kind(&mut sifted, 1);
                sifted.truncate(4);
                singles.extend(sifted);
            }
        } else {
            singles = complete.clone();
            best_of_each_kind(&mut singles, 1);
            singles.truncate(4);
        }
        let mut leading = complete.clone();
        best_of_each_kind(&mut leading, 1);
        leading.truncate(4);
        let mut pairs: Vec<Vec<Draft>> = Vec::new();
        for first in leading.iter().chain(&singles) {
            for second in leading.iter().chain(&singles) {
                let drafts: Vec<Draft> = first.drafts.iter().chain(&second.drafts).cloned().collect();
                if covers(&drafts, &orders) && drafts.len() <= MOST_SECTIONS {
                    pairs.push(drafts);
                }
            }
        }
        let mut pairs = self.sift(pairs, &orders);
        best_of_each_kind(&mut pairs, 1);
        if orders.len() >= 3 {
            let mut triples: Vec<Vec<Draft>> = Vec::new();
            for first in &singles {
                for second in &singles {
                    for third in &singles {
                        let drafts: Vec<Draft> =
                            [first, second, third].iter().flat_map(|c| c.drafts.iter().cloned()).collect();
                        let rising = drafts.windows(2).all(|pair| pair[0].covers <= pair[1].covers);
                        if rising && covers(&drafts, &orders) {
                            triples.push(drafts);
                        }
                    }
                }
            }
            complete.extend(self.sift(triples, &orders));
        }
        complete.extend(pairs);
        complete
    }

    /// Quick values for cascades that deal with these orders, best first.
    fn sift(&self, cascades: Vec<Vec<Draft>>, orders: &[u32]) -> Vec<Candidate> {
        let samples = self.samples_for(orders);
        let mut candidates: Vec<Candidate> = cascades
            .into_par_iter()
            .map(|drafts| {
                let assembly = Assembly::cascade(&drafts.iter().collect::<Vec<_>>(), self.ends);
                let variations = self.variations(&assembly, true, SIFTING_BUILDS);
                let problem = self.problem(&assembly, &samples, &variations);
                let point = problem.improve(&problem.start(), QUICK);
                Candidate { assembly, drafts, point, trimmed: true }
            })
            .collect();
        candidates.sort_by(|a, b| a.point.worst.total_cmp(&b.point.worst));
        candidates
    }

    /// Builds for the search.
    pub fn variations(&self, assembly: &Assembly, trimmed: bool, count: usize) -> Vec<Variation> {
        variations(assembly, self.shelf, self.temperature_c, trimmed, count, self.seed)
    }

    /// The problem of one network.
    pub fn problem<'b>(
        &'b self,
        assembly: &'b Assembly,
        samples: &'b [Sample],
        variations: &'b [Variation],
    ) -> Problem<'b> {
        Problem { assembly, shelf: self.shelf, samples, variations, loss_hz: self.loss_hz() }
    }

    /// The candidates worth making: with and without trims, values chosen
    /// thoroughly, different in kind or in number of parts.
    fn finalists(&self, mut sifted: Vec<Candidate>) -> Vec<Candidate> {
        sifted.sort_by(|a, b| a.point.worst.total_cmp(&b.point.worst));
        let mut chosen: Vec<(String, usize, usize)> = Vec::new();
        sifted.retain(|candidate| {
            let key = (candidate.signature(), candidate.assembly.slots.len(), candidate.assembly.coils());
            let same = chosen.iter().filter(|other| **other == key).count();
            let alike = chosen.iter().filter(|other| other.0 == key.0).count();
            let keep = same < 1 && alike < ALIKE;
            if keep {
                chosen.push(key);
            }
            keep
        });
        sifted.truncate(3 * MADE);
        let variants: Vec<(Candidate, bool)> = sifted
            .into_iter()
            .flat_map(|candidate| {
                let trims = !candidate.assembly.trims.is_empty();
                let mut variants = vec![(candidate.clone(), false)];
                if trims {
                    variants.push((candidate, true));
                }
                variants
            })
            .collect();
        let mut finalists: Vec<Candidate> =
            variants.into_par_iter().map(|(candidate, trimmed)| self.chosen(candidate, trimmed)).collect();
        finalists.sort_by(|a, b| {
            let meets = |c: &Candidate| c.point.worst <= 0.0;
            meets(b).cmp(&meets(a)).then_with(|| {
                if meets(a) && meets(b) {
                    a.effort().total_cmp(&b.effort()).then(a.point.worst.total_cmp(&b.point.worst))
                } else {
                    a.point.worst.total_cmp(&b.point.worst)
                }
            })
        });
        let mut large = 0;
        let most_large = if self.lean == Lean::Even { LARGE_MADE } else { 1 };
        finalists.retain(|candidate| {
            large += usize::from(candidate.assembly.freedoms.len() > LARGE);
            candidate.assembly.freedoms.len() <= LARGE || large <= most_large
        });
        finalists.truncate(if self.lean == Lean::Even { MADE } else { MADE_LEANING });
        if finalists.iter().all(|candidate| candidate.point.worst > HOPELESS) && self.lean == Lean::Even {
            finalists.truncate(MADE_HOPELESS);
        }
        finalists
    }

    /// The candidate with values chosen thoroughly, over builds with or without trims.
    fn chosen(&self, candidate: Candidate, trimmed: bool) -> Candidate {
        let samples = self.samples_for(&candidate.orders());
        let variations = self.variations(&candidate.assembly, trimmed, candidate.choosing_builds());
        let problem = self.problem(&candidate.assembly, &samples, &variations);
        let point = problem.improve(&candidate.point, THOROUGH);
        Candidate { point, trimmed, ..candidate }
    }

    /// The candidate made from the list and built: with single values; where those do
    /// not meet the brief, with a pair of capacitors in one place; else with pairs all over.
    fn made(&self, candidate: &Candidate) -> Vec<Made> {
        let samples = self.samples_for(&candidate.orders());
        let variations = self.variations(&candidate.assembly, candidate.trimmed, candidate.choosing_builds());
        let problem = self.problem(&candidate.assembly, &samples, &variations);
        let mut all: Vec<Made> = Vec::new();
        let freedoms = candidate.assembly.freedoms.len();
        let one_place = (0..if freedoms <= FEW { freedoms } else { 0 }).map(Pairs::In);
        let ways: Vec<Pairs> = match self.lean {
            Lean::Even => {
                // More margin than asked for is not worth a bank of capacitors.
                let never = wants_banks(&problem, candidate).then_some(Pairs::Never);
                let nowhere = std::iter::once(Pairs::Nowhere);
                never.into_iter().chain(nowhere).chain(one_place).chain([Pairs::Everywhere]).collect()
            }
            _ => vec![Pairs::Everywhere],
        };
        for pairs in ways {
            let Some(made) = self.made_with(&problem, candidate, pairs) else { continue };
            // Where more than a neighbouring value is wrong, pairs do not mend it.
            let settled = made.design.met || made.worst_miss > HOPELESS && pairs != Pairs::Never;
            if all.iter().all(|other| other.design.circuit != made.design.circuit) {
                all.push(made);
            }
            if settled {
                break;
            }
        }
        all
    }

    fn made_with(&self, problem: &Problem, candidate: &Candidate, pairs: Pairs) -> Option<Made> {
        let mut trims = candidate.assembly.trims.clone();
        if !candidate.trimmed {
            trims.clear();
        }
        // A trim that would not lead to the planned value is left out, and its part
        // made as all others are.
        let finished = loop {
            let slots: Vec<usize> = trims.iter().map(|trim| trim.slot).collect();
            let point = rounded(problem, &candidate.point, &slots, pairs)?;
            let able: Vec<_> = trims.iter().map(|trim| adjustable(problem, &point, trim)).collect();
            if let Some(unable) = able.iter().position(Option::is_none) {
                trims.remove(unable);
                continue;
            }
            let adjustables: Vec<_> = able.into_iter().flatten().collect();
            let finished = finished(problem, &point, &adjustables, self.task);
            let Some(&failing) = finished.failing.first() else { break finished };
            trims.retain(|trim| trim.slot != failing);
        };
        let hopeless =
            candidate.point.worst > 0.0 && pairs != Pairs::Nowhere || candidate.point.worst > HOPELESS;
        let count = if hopeless { self.builds.min(RANKING_BUILDS) } else { self.builds };
        let (design, worst_miss) = design(finished, self.task, self.temperature_c, count, self.seed);
        Some(Made { design, worst_miss })
    }
}

/// Whether a capacitance of the candidate lies above the largest listed.
fn wants_banks(problem: &Problem, candidate: &Candidate) -> bool {
    let Point { x, made, .. } = &candidate.point;
    let largest_f = problem.shelf.largest_capacitor_f();
    (0..candidate.assembly.slots.len()).any(|slot| {
        let kind = slot_kind(&candidate.assembly.slots[slot]);
        kind == PartKind::Capacitor
            && candidate.assembly.slot_value(slot, x, made, problem.shelf) > 1.001 * largest_f
    })
}

fn covers(drafts: &[Draft], orders: &[u32]) -> bool {
    orders.iter().all(|order| drafts.iter().any(|draft| draft.covers.contains(order)))
}

/// Keeps the first `count` of each signature.
fn best_of_each_kind(candidates: &mut Vec<Candidate>, count: usize) {
    let mut seen: Vec<String> = Vec::new();
    candidates.retain(|candidate| {
        let signature = candidate.signature();
        let keep = seen.iter().filter(|other| **other == signature).count() < count;
        seen.push(signature);
        keep
    });
}

/// Met before not met; of the met the least effort; of the others the least miss,
/// where a whole unit (a tenth of the reduction, a fifth of the loss) lies between
/// them, else the least effort.
fn better(a: &Made, b: &Made) -> std::cmp::Ordering {
    b.design.met.cmp(&a.design.met).then_with(|| {
        if a.design.met && b.design.met {
            a.effort().total_cmp(&b.effort()).then(a.worst_miss.total_cmp(&b.worst_miss))
        } else {
            let units = |made: &Made| made.worst_miss.floor();
            units(a)
                .total_cmp(&units(b))
                .then(a.effort().total_cmp(&b.effort()))
                .then(a.worst_miss.total_cmp(&b.worst_miss))
        }
    })
}
