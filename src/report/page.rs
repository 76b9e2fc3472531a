//! The page: the findings in the order in which one asks for them.

use minijinja::{Environment, Value, context, value::Serde};
use serde::Serialize;

use super::charts::{self, Chart, Size};
use super::excerpt::OUTLINE_COLUMNS;
use super::verdict::{self, level_with_volts, loss_words};
use super::wording::{
    band, confidence, converter, counted, dbfs, decibel, deviation, duration, hertz, hertz_short,
    level_error, listing, number, sentence, short, si, small_hertz, unbroken, wander, weighted, with_unit,
};
use super::{CAUTIONS, Excerpt, Material, ReportError, bench, partslist, wav};
use crate::analysis::{BENCH_CAPTURES, Cause};
use crate::plan::{Design, ReductionTarget};
use crate::simulation::BeforeAfter;

const TEMPLATE: &str = include_str!("page.html");

/// Fills the template.
pub(super) fn compose(material: &Material) -> Result<String, ReportError> {
    let mut environment = Environment::new();
    // The name ends in `.html`: all text is escaped unless marked safe.
    environment.add_filter("sentence", |text: String| sentence(&text));
    environment.add_template("page.html", TEMPLATE)?;
    Ok(environment.get_template("page.html")?.render(view(material))?)
}

/// Data of ours as the template sees it.
fn serialised(data: impl Serialize) -> Value {
    Value::from(Serde(data))
}

fn view(material: &Material) -> Value {
    let plan = material.plan;
    let design = &plan.design;
    let (standing, headline) = verdict::headline(material);
    context! {
        line => plan.brief.line.clone(),
        version => env!("CARGO_PKG_VERSION"),
        answer => verdict::answer(material),
        standing => serialised(standing),
        headline => headline,
        verdict => serialised(verdict::lines(material)),
        misses => material.simulation.misses.clone(),
        obstacles => plan.obstacles.clone(),
        need => verdict::need(material),
        causes => serialised(causes(material)),
        found => serialised(found(material)),
        harmonics => serialised(harmonics(material)),
        supplies => serialised(supplies(material)),
        folding => serialised(folding(material)),
        analysis_notes => material.analysis.notes.clone(),
        summary => design.summary.clone(),
        brief => serialised(brief(material)),
        schematic => inline(&super::schematic_svg(&plan.design.circuit), "Schematic of the filter with source and load", true),
        sections => serialised(sections(design)),
        parts => serialised(parts(material)),
        parts_total => partslist::total(&design.circuit.parts).map(|sum| number(sum, 2)),
        parts_count => counted(design.circuit.parts.len(), "part", "parts"),
        trims => serialised(trims(design)),
        builds_share => with_unit(design.builds.meeting_pct, 1, "%"),
        builds_count => design.builds.count,
        builds_seed => design.builds.seed,
        windows => serialised(windows(material)),
        windows_beside => plan.q_windows.iter().any(|w| w.q_chosen.is_none()),
        charts => serialised(pictures(material)),
        residual => serialised(residual(material)),
        any_in_noise => material.simulation.residual.iter().any(|r| r.at_noise_floor),
        keep => serialised(keep(material)),
        third_octaves => serialised(third_octaves(material)),
        figures => serialised(figures(material)),
        simulation_notes => material.simulation.notes.clone(),
        alternatives => serialised(alternatives(material)),
        plan_notes => plan.notes.clone(),
        // Where there is no filter, there is nothing to compare.
        listening => serialised(
            material.excerpt.filter(|_| verdict::has_filter(material)).map(|excerpt| listening(excerpt, hum_hz(material))),
        ),
        purchases => serialised(bench::purchases(&design.circuit.parts)),
        setup => bench::setup(material),
        steps => serialised(bench::steps(material)),
        readings => serialised(bench::readings(material)),
        layout => bench::layout(material),
        cautions => serialised(CAUTIONS),
        source_resistance => si(design.circuit.source.resistance_ohm, "Ω", 3),
        trimmed => !design.trims.is_empty(),
        temperature => format!("{} to {}\u{a0}°C", short(plan.brief.temperature_from_c), short(plan.brief.temperature_to_c)),
        design_spread => format!("± {} about {}", small_hertz(plan.design_spread_hz), hertz(plan.centre_hz)),
        guard => hertz_short(plan.brief.guard_hz),
    }
}

/// A likely cause as the page tells it.
#[derive(Serialize)]
struct CauseRow {
    cause: String,
    confidence: Option<String>,
    evidence: String,
    look_first: String,
    first_cure: String,
    tell_apart: String,
}

fn causes(material: &Material) -> Vec<CauseRow> {
    let row = |cause: &Cause| CauseRow {
        cause: cause.cause.clone(),
        confidence: (cause.confidence > 0.0).then(|| number(cause.confidence, 2)),
        evidence: cause.evidence.clone(),
        look_first: cause.look_first.clone(),
        first_cure: cause.first_cure.clone(),
        // The two recordings at the bench have a place of their own on the page.
        tell_apart: cause.tell_apart.replace(BENCH_CAPTURES, "").trim().to_owned(),
    };
    material.analysis.causes.iter().map(row).collect()
}

/// A name and what is to be said of it.
#[derive(Serialize)]
struct Fact {
    name: &'static str,
    text: String,
}

fn fact(name: &'static str, text: String) -> Fact {
    Fact { name, text }
}

fn found(material: &Material) -> Vec<Fact> {
    let mains = &material.analysis.mains;
    let mut facts = Vec::new();
    for capture in &material.analysis.captures {
        let clipped = if capture.clipped_samples > 0 {
            format!(
                "; {} at the converter's limit, so that some harmonics may come from the clipping",
                counted(capture.clipped_samples as usize, "sample", "samples")
            )
        } else {
            "; no clipping".to_owned()
        };
        facts.push(fact(
            "Recording",
            format!(
                "{}: {} at {} Hz, channel {} of {}{clipped}",
                capture.path,
                duration(capture.duration_s),
                capture.sample_rate_hz,
                capture.channel,
                capture.channels
            ),
        ));
    }
    let captures = material.analysis.captures.iter();
    facts.extend(
        captures.clone().filter_map(|c| c.converter.as_ref()).map(|c| fact("Converter", converter(c))),
    );
    facts.extend(
        captures
            .filter_map(|c| c.weighted.as_ref())
            .map(|w| fact("Weighted", weighted(w).replace(" -", " \u{2212}"))),
    );
    if let Some(frequency) = mains.frequency_hz {
        let error = mains
            .frequency_se_hz
            .map_or(String::new(), |se| format!(" ({}, one standard error)", unbroken(&deviation(se))));
        facts.push(fact("Mean frequency", format!("{}{error}", with_unit(frequency, 5, "Hz"))));
    }
    facts.push(fact(
        "Supply",
        mains.nominal_hz.map_or("undetermined".to_owned(), |hz| format!("{} mains", hertz_short(hz))),
    ));
    if let Some(spread) = mains.spread_hz {
        facts.push(fact("Wander", wander(spread, mains.spread_floor_hz)));
    }
    facts.push(fact("Confidence", confidence(mains.confidence)));
    facts
}

#[derive(Serialize)]
struct HarmonicRow {
    order: u32,
    frequency: String,
    level: String,
    error: String,
    volts: String,
    phase: String,
    over_floor: String,
}

fn harmonics(material: &Material) -> Vec<HarmonicRow> {
    material
        .analysis
        .harmonics
        .iter()
        .map(|h| HarmonicRow {
            order: h.order,
            frequency: hertz(h.frequency_hz),
            level: dbfs(h.level_dbfs),
            error: h.level_se_db.map_or("–".to_owned(), level_error),
            volts: h.rms_v.map_or("–".to_owned(), |v| si(v, "V", 3)),
            phase: format!("{}°", number(h.phase_deg, 0)),
            over_floor: with_unit(h.over_floor_db, 1, "dB"),
        })
        .collect()
}

fn supplies(material: &Material) -> Vec<String> {
    let supplies = material.analysis.other_supplies.iter();
    supplies
        .map(|s| {
            format!(
                "{} supply: found at {}, its strongest line at {}",
                hertz_short(s.nominal_hz),
                hertz(s.frequency_hz),
                dbfs(s.level_dbfs)
            )
        })
        .collect()
}

fn folding(material: &Material) -> Vec<String> {
    let folded = material.analysis.folding.iter();
    folded
        .map(|f| {
            let remark = if f.remark.is_empty() { String::new() } else { format!(": {}", f.remark) };
            format!("order {} ({}) at {}{remark}", f.order, hertz(f.frequency_hz), hertz(f.appears_at_hz))
        })
        .collect()
}

fn brief(material: &Material) -> Vec<Fact> {
    let brief = &material.plan.brief;
    let target = match brief.target {
        ReductionTarget::ReduceByDb(db) => format!("each harmonic down by {}", decibel(db)),
        ReductionTarget::LeaveV(v) => format!("at most {} RMS left of each harmonic", si(v, "V", 3)),
        ReductionTarget::LeaveDbfs(level) => format!("at most {} left of each harmonic", dbfs(level)),
    };
    let orders = brief.orders.as_ref().map_or(" (every harmonic found that needs it)".to_owned(), |orders| {
        format!(" ({} {})", if orders.len() == 1 { "order" } else { "orders" }, listing(orders))
    });
    let keep: Vec<String> = brief
        .keep
        .iter()
        .map(|k| format!("{} within {}", band(k.from_hz, k.to_hz), decibel(k.allowed_db)))
        .collect();
    let inductance = if brief.source.inductance_h > 0.0 {
        format!(" and {} in series", si(brief.source.inductance_h, "H", 3))
    } else {
        String::new()
    };
    let capacitance = if brief.load.capacitance_f > 0.0 {
        format!(" beside {}", si(brief.load.capacitance_f, "F", 3))
    } else {
        String::new()
    };
    vec![
        fact("Asked", format!("{target}{orders}")),
        fact("To keep", listing(&keep)),
        fact("Source", format!("{}{inductance}", si(brief.source.resistance_ohm, "Ω", 3))),
        fact("Load", format!("{}{capacitance}", si(brief.load.resistance_ohm, "Ω", 3))),
        fact("Full scale", format!("{} peak", si(brief.full_scale_v, "V", 3))),
        fact(
            "Stock list",
            brief.stock.clone().unwrap_or_else(|| "the built-in list of typical values".to_owned()),
        ),
    ]
}

#[derive(Serialize)]
struct SectionRow {
    kind: String,
    order: String,
    notch: String,
    q: String,
    depth: String,
    parts: String,
}

fn sections(design: &Design) -> Vec<SectionRow> {
    let or_dash = |text: Option<String>| text.unwrap_or_else(|| "–".to_owned());
    design
        .sections
        .iter()
        .map(|s| SectionRow {
            kind: s.kind.clone(),
            order: or_dash(s.order.map(|order| order.to_string())),
            notch: or_dash(s.notch_hz.map(hertz)),
            q: or_dash(s.q.map(|q| number(q, 2))),
            depth: or_dash(s.depth_db.map(decibel)),
            parts: s.parts.join(", "),
        })
        .collect()
}

#[derive(Serialize)]
struct PartRow {
    reference: String,
    kind: &'static str,
    value: String,
    tolerance: String,
    material: String,
    number: String,
    remarks: String,
    price: String,
}

fn parts(material: &Material) -> Vec<PartRow> {
    material
        .plan
        .design
        .circuit
        .parts
        .iter()
        .map(|p| PartRow {
            reference: p.reference.clone(),
            kind: partslist::word(p.kind),
            value: partslist::value(p),
            tolerance: format!("± {}\u{a0}%", short(p.tolerance_pct)),
            material: p.material.clone().unwrap_or_else(|| "–".to_owned()),
            number: p.number.clone().unwrap_or_else(|| "–".to_owned()),
            remarks: partslist::remarks(p).join(", "),
            price: p.price.map_or("–".to_owned(), |price| number(price, 2)),
        })
        .collect()
}

#[derive(Serialize)]
struct TrimRow {
    step: u32,
    part: String,
    method: String,
    range: String,
    frequency: String,
    aim: String,
    residue: String,
    instruction: String,
}

fn trims(design: &Design) -> Vec<TrimRow> {
    let unit_of = |reference: &str| {
        let part = design.circuit.parts.iter().find(|p| p.reference == reference);
        part.map_or("", |p| partslist::unit(p.kind))
    };
    design
        .trims
        .iter()
        .map(|t| TrimRow {
            step: t.step,
            part: t.part.clone(),
            method: t.method.clone(),
            range: trim_range(t.from_si, t.to_si, unit_of(&t.part)),
            frequency: hertz(t.frequency_hz),
            aim: t.aim.clone(),
            residue: format!("± {}\u{a0}%", short(t.residue * 100.0)),
            instruction: t.instruction.clone(),
        })
        .collect()
}

fn trim_range(from: f64, to: f64, unit: &str) -> String {
    let to = si(to, unit, 3);
    if from > 0.0 { format!("{} to {to}", si(from, unit, 3)) } else { format!("up to {to}") }
}

#[derive(Serialize)]
struct WindowRow {
    order: u32,
    least: String,
    most: String,
    chosen: String,
    closed_by: String,
}

fn windows(material: &Material) -> Vec<WindowRow> {
    let q = |value: f64| if value == f64::INFINITY { "no bound".to_owned() } else { number(value, 2) };
    material
        .plan
        .q_windows
        .iter()
        .map(|w| WindowRow {
            order: w.order,
            least: q(w.q_min),
            most: q(w.q_max),
            chosen: w.q_chosen.map_or("–".to_owned(), q),
            closed_by: w.closed_by.as_ref().map_or("open".to_owned(), |what| format!("closed by {what}")),
        })
        .collect()
}

#[derive(Serialize)]
struct Picture {
    file: &'static str,
    title: &'static str,
    caption: String,
    wide: String,
    narrow: String,
}

fn pictures(material: &Material) -> Vec<Picture> {
    let wide = charts::all(material, Size::WIDE);
    let narrow = charts::all(material, Size::NARROW);
    wide.into_iter().zip(narrow).map(|(wide, narrow)| picture(wide, narrow)).collect()
}

fn picture(wide: Chart, narrow: Chart) -> Picture {
    let label = format!("{}. {}", wide.title, wide.description);
    Picture {
        file: wide.file,
        title: wide.title,
        caption: wide.caption,
        wide: inline(&wide.svg, &label, false),
        narrow: inline(&narrow.svg, &label, false),
    }
}

/// An SVG file as part of the page: its name space is the page's, it fills the
/// width there is (up to its own where `own_width` says so), and its title would
/// only pop up as a hint.
fn inline(svg: &str, label: &str, own_width: bool) -> String {
    let Some((start, end)) = svg.find("<svg").and_then(|at| Some((at, at + svg[at..].find('>')?))) else {
        return String::new();
    };
    let head = &svg[start..end];
    let view_box =
        head.split("viewBox=\"").nth(1).and_then(|rest| rest.split('"').next()).unwrap_or("0 0 1 1");
    let width = attribute(head, "width").unwrap_or_default();
    let mut body = svg[end + 1..].to_owned();
    for element in ["title", "desc"] {
        let (open, close) = (format!("<{element}>"), format!("</{element}>"));
        if let (Some(from), Some(to)) = (body.find(&open), body.find(&close)) {
            body.replace_range(from..to + close.len(), "");
        }
    }
    let style =
        if width.is_empty() || !own_width { String::new() } else { format!(" style=\"--own:{width}px\"") };
    let label = charts::escaped(label);
    format!("<svg viewBox=\"{view_box}\" role=\"img\" aria-label=\"{label}\"{style}>{}", body.trim_start())
}

fn attribute(head: &str, name: &str) -> Option<String> {
    let value = head.split(&format!(" {name}=\"")).nth(1)?.split('"').next()?;
    Some(value.trim_end_matches("px").to_owned())
}

#[derive(Serialize)]
struct ResidualRow {
    order: u32,
    frequency: String,
    before: String,
    after: String,
    reduction: String,
    predicted: String,
    asked: String,
}

fn residual(material: &Material) -> Vec<ResidualRow> {
    let full_scale_v = material.plan.brief.full_scale_v;
    material
        .simulation
        .residual
        .iter()
        .map(|r| {
            let (most, least) = if r.at_noise_floor { ("≤ ", "≥ ") } else { ("", "") };
            ResidualRow {
                order: r.order,
                frequency: hertz(r.frequency_hz),
                before: level_with_volts(r.before_dbfs, full_scale_v),
                after: format!("{most}{}", level_with_volts(r.after_dbfs, full_scale_v)),
                reduction: format!("{least}{}", decibel(r.reduction_db)),
                predicted: decibel(r.predicted_db),
                asked: r.target_db.map_or("–".to_owned(), decibel),
            }
        })
        .collect()
}

#[derive(Serialize)]
struct KeepRow {
    band: String,
    allowed: String,
    nominal: String,
    worst: String,
    measured: String,
    judged: String,
}

fn keep(material: &Material) -> Vec<KeepRow> {
    let measured = &material.simulation.keep;
    material
        .plan
        .design
        .keep
        .iter()
        .map(|k| {
            let here = measured.iter().find(|m| m.from_hz == k.from_hz && m.to_hz == k.to_hz);
            KeepRow {
                band: band(k.from_hz, k.to_hz),
                allowed: decibel(k.allowed_db),
                nominal: loss_words(k.loss_db),
                worst: loss_words(k.loss_worst_db),
                measured: here
                    .and_then(|m| m.measured_db)
                    .map_or("too little signal in the band to tell".to_owned(), loss_words),
                judged: with_unit(k.judged_share * 100.0, 0, "%"),
            }
        })
        .collect()
}

#[derive(Serialize)]
struct OctaveRow {
    mid: String,
    before: String,
    after: String,
    change: String,
}

fn third_octaves(material: &Material) -> Vec<OctaveRow> {
    let bands = material.simulation.third_octaves.iter();
    bands
        .map(|b| OctaveRow {
            mid: hertz_short(b.mid_hz),
            before: dbfs(b.before_dbfs),
            after: dbfs(b.after_dbfs),
            change: if (b.before_dbfs - b.after_dbfs).is_finite() {
                loss_words(b.before_dbfs - b.after_dbfs)
            } else {
                "–".to_owned()
            },
        })
        .collect()
}

fn figures(material: &Material) -> Vec<Fact> {
    let s = material.simulation;
    let mut facts = vec![
        fact("Settles to 1\u{a0}% in", duration(s.settling_s)),
        fact(
            "Delays the signal by",
            format!(
                "{} in the middle of the keep band; its most and its least delayed part are {} apart",
                duration(s.group_delay_s),
                duration(s.group_delay_spread_s)
            ),
        ),
        fact(
            "Largest sample",
            format!("{} before, {} after", dbfs(s.peak_before_dbfs), dbfs(s.peak_after_dbfs)),
        ),
        fact(
            "Headroom gained",
            format!(
                "{}, which is {} bits of the converter",
                decibel(s.headroom_gained_db),
                number(s.headroom_gained_db / (20.0 * 2_f64.log10()), 1)
            ),
        ),
        fact("Least loss in the keep bands", loss_words(material.plan.design.flat_loss_db)),
    ];
    let weighted = |pair: BeforeAfter| format!("{} before, {} after", dbfs(pair.before), dbfs(pair.after));
    if let Some(pair) = s.hum_a_weighted_dbfs {
        facts.push(fact("Hum, A-weighted (IEC 61672-1)", weighted(pair)));
    }
    if let Some(pair) = s.hum_468_weighted_dbfs {
        facts.push(fact("Hum, weighted by ITU-R BS.468-4, RMS", weighted(pair)));
    }
    facts
}

#[derive(Serialize)]
struct AlternativeRow {
    summary: String,
    met: bool,
    reduction: String,
    loss: String,
    builds: String,
    parts: usize,
    price: String,
    chosen: bool,
}

fn alternatives(material: &Material) -> Vec<AlternativeRow> {
    let plan = material.plan;
    std::iter::once((&plan.design, true))
        .chain(plan.alternatives.iter().map(|d| (d, false)))
        .map(|(d, chosen)| AlternativeRow {
            summary: d.summary.clone(),
            met: d.met,
            reduction: d
                .predicted
                .iter()
                .filter(|p| p.target_db.is_some())
                .min_by(|a, b| a.reduction_worst_db.total_cmp(&b.reduction_worst_db))
                .map_or("–".to_owned(), |p| {
                    format!("{} (order {})", decibel(p.reduction_worst_db), p.order)
                }),
            loss: d
                .keep
                .iter()
                .max_by(|a, b| a.loss_worst_db.abs().total_cmp(&b.loss_worst_db.abs()))
                .map_or("–".to_owned(), |k| loss_words(k.loss_worst_db)),
            builds: with_unit(d.builds.meeting_pct, 1, "%"),
            parts: d.circuit.parts.len(),
            price: d.price.map_or("–".to_owned(), |price| number(price, 2)),
            chosen,
        })
        .collect()
}

#[derive(Serialize)]
struct Player {
    name: &'static str,
    key: &'static str,
    uri: String,
    matched: f64,
    matched_words: String,
    strip: String,
}

#[derive(Serialize)]
struct Listening {
    players: Vec<Player>,
    what: String,
    speed: Option<String>,
    gain: String,
}

/// The supply's nominal frequency, or the 50 Hz of an example.
fn hum_hz(material: &Material) -> f64 {
    material.analysis.mains.nominal_hz.unwrap_or(50.0)
}

/// What a factor does to what is heard: `turned up by 6.0 dB`; `None` where that is nothing.
fn turned(factor: f64) -> Option<String> {
    let db = 20.0 * factor.log10();
    let way = if db < 0.0 { "down" } else { "up" };
    (db.abs() >= 0.05).then(|| format!("turned {way} by {}", with_unit(db.abs(), 1, "dB")))
}

fn listening(excerpt: &Excerpt, hum_hz: f64) -> Listening {
    let names = [("Before", "before"), ("After", "after"), ("Removed", "removed")];
    let matching = excerpt.matching();
    let full = excerpt.outlines.iter().flatten().map(|(low, high)| high.max(-low)).fold(0.0, f32::max);
    let players = names.iter().enumerate().map(|(n, &(name, key))| Player {
        name,
        key,
        uri: wav::data_uri(&wav::encode(&excerpt.tracks[n], excerpt.gain, excerpt.rate_hz)),
        matched: matching[n],
        matched_words: turned(matching[n]).unwrap_or("as it is".to_owned()),
        strip: strip(&excerpt.outlines[n], full),
    });
    let what = if excerpt.whole {
        format!("the whole recording, channel {}", excerpt.channel)
    } else {
        format!(
            "an excerpt of {} from {} into the recording, where the hum is worst, channel {}",
            duration(excerpt.length_s),
            duration(excerpt.start_s),
            excerpt.channel
        )
    };
    let speed = (excerpt.speed > 1).then(|| {
        format!(
            "This line is too slow to be heard as it is: it is played {} times faster than it was recorded, so \
             that {} is heard as {}.",
            excerpt.speed,
            hertz_short(hum_hz),
            hertz_short(hum_hz * f64::from(excerpt.speed))
        )
    });
    let gain = turned(excerpt.gain)
        .map_or("All three are played at the level they have".to_owned(), |words| {
            format!("All three are {words} alike")
        });
    Listening { players: players.collect(), what, speed, gain }
}

/// Outline of the waveform as the points of an SVG polygon in a box of
/// `OUTLINE_COLUMNS` by 100: highest values from left to right, lowest back.
/// `full` fills half the height.
fn strip(outline: &[(f32, f32)], full: f32) -> String {
    let y = |sample: f32| {
        format!("{:.1}", 50.0 - 48.0 * f64::from(sample) / f64::from(full.max(f32::MIN_POSITIVE)))
    };
    let width = OUTLINE_COLUMNS as f64 / outline.len().max(1) as f64;
    let there = outline.iter().enumerate().map(|(n, (_, high))| (n, *high));
    let back = outline.iter().enumerate().rev().map(|(n, (low, _))| (n, *low));
    let points = there.chain(back).map(|(n, s)| format!("{:.1},{}", (n as f64 + 0.5) * width, y(s)));
    points.collect::<Vec<_>>().join(" ")
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_inlined_picture_names_no_address_and_keeps_its_drawing() {
        let svg = "<?xml version=\"1.0\"?>\n<svg xmlns=\"http://www.w3.org/2000/svg\" width=\"300\" viewBox=\"0 0 600 200\">\
                   <title>T</title><circle r=\"1\"/></svg>";
        let inlined = inline(svg, "a \"dot\"", true);
        assert!(!inlined.contains("http"));
        assert!(inlined.contains("viewBox=\"0 0 600 200\"") && inlined.contains("<circle r=\"1\"/></svg>"));
        assert!(inlined.contains("aria-label=\"a &quot;dot&quot;\"") && inlined.contains("--own:300px"));
        assert!(!inlined.contains("<title>"));
    }

    #[test]
    fn what_is_heard_is_turned_up_or_down_in_words() {
        assert_eq!(turned(2.0).as_deref(), Some("turned up by 6.0\u{a0}dB"));
        assert_eq!(turned(0.1).as_deref(), Some("turned down by 20.0\u{a0}dB"));
        assert_eq!(turned(1.001), None);
    }

    #[test]
    fn no_picture_leaves_nothing() {
        assert_eq!(inline("", "nothing", true), "");
    }

    #[test]
    fn a_strip_stays_in_its_box_and_needs_no_samples() {
        assert_eq!(strip(&[], 0.0), "");
        for point in strip(&[(-0.5, 0.5), (0.1, 0.2)], 0.5).split(' ') {
            let (_, y) = point.split_once(',').unwrap();
            assert!((0.0..=100.0).contains(&y.parse::<f64>().unwrap()));
        }
    }
}
