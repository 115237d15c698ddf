//! The record of a filter: what was asked, poles and zeros, sections, levels, and why they are put together so.

use std::f64::consts::TAU;

use serde::{Serialize, Serializer};

use super::super::numbers::{level, short};
use crate::search::{CascadeSection, Filter, Gains, Level, Pairing, Pairings, Sequence};
use crate::target::{Approximation, Band, EdgeAt, Pole, PoleFigures, Reference, Shape, Zeros};

/// The name and version of the JSON format: keys may be added to it, none is renamed or removed.
pub const SECTIONS_FORMAT: &str = "roundwell-sections/1";

/// A filter as sections. Frequencies in Hz, poles in rad/s, levels in dB; what is not known is `None`.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SectionsRecord {
    /// [`SECTIONS_FORMAT`].
    pub format: &'static str,
    /// The title.
    pub title: String,
    /// What was asked and what it led to.
    pub filter: FilterRecord,
    /// Poles, in the order of their numbers.
    pub poles: Vec<PoleRecord>,
    /// Pairs of zeros on the imaginary axis, in the order of their numbers; the other zeros lie at DC and at infinity.
    pub zeros: Vec<NotchRecord>,
    /// The sections in signal order.
    pub sections: Vec<SectionOfFilter>,
    /// How they were put together.
    pub choice: ChoiceRecord,
    /// Whether the filter stands in a job with further keys.
    #[serde(skip)]
    pub has_other_keys: bool,
}

/// What was asked of a filter and what it led to.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FilterRecord {
    /// The approximation.
    pub approximation: Approximation,
    /// `low-pass`, `high-pass`, `band-pass` or `band-stop`.
    pub response: &'static str,
    /// The order of the low-pass prototype.
    pub order: usize,
    /// How many poles the filter has.
    pub poles: usize,
    /// The pass-band edges; for a filter designed by its delay none.
    pub edges_hz: Vec<f64>,
    /// What holds at the edges: `half-power`, `ripple`, `attenuation`, `level` or `delay`.
    pub edge_at: &'static str,
    /// How far the edges lie under the reference.
    pub edge_db: Option<f64>,
    /// The delay at DC of a filter designed by it, s.
    pub delay_s: Option<f64>,
    /// Ripple of the pass band.
    pub ripple_db: Option<f64>,
    /// Attenuation of the stop band as it was asked for, under the reference.
    pub attenuation_db: Option<f64>,
    /// From which gain levels count: `peak` or `dc`.
    pub reference: &'static str,
    /// The gain at the reference, without sign.
    pub gain: f64,
    /// How far the peak lies over the gain where the prototype has DC.
    pub peak_over_dc_db: f64,
    /// Where the response has fallen by 3.01 dB under the reference.
    pub half_power_hz: Vec<f64>,
    /// Whether the filter inverts.
    pub inverts: bool,
    /// The stop band, where its edges are given.
    pub stop_band: Option<StopBandRecord>,
}

/// A stop band and its margin.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct StopBandRecord {
    /// Its edges.
    pub edges_hz: Vec<f64>,
    /// What was asked.
    pub asked_db: f64,
    /// The least attenuation beyond the edges.
    pub least_db: f64,
    /// How much more than asked that is.
    pub margin_db: f64,
    /// Where the attenuation that was asked for is reached.
    pub reached_hz: Vec<f64>,
    /// Whether the order is the least that will do, and not a given one.
    pub order_is_least: bool,
    /// The next smaller order.
    pub smaller_order: Option<usize>,
    /// What that would give.
    pub smaller_order_least_db: Option<f64>,
}

/// One set of poles.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct PoleRecord {
    /// Its number.
    pub number: usize,
    /// Pole frequency.
    pub f0_hz: f64,
    /// Quality factor; `None` for a single real pole.
    pub q: Option<f64>,
    /// Real parts, rad/s: one for a complex pair or a single pole, two for two real poles.
    pub real: Vec<f64>,
    /// Imaginary part of the upper pole of a pair, rad/s; otherwise 0.
    pub imaginary: f64,
}

/// One pair of zeros on the imaginary axis.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct NotchRecord {
    /// Its number.
    pub number: usize,
    /// Its frequency.
    pub fz_hz: f64,
}

/// A level and its frequency.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct LevelRecord {
    /// From the input of the filter.
    pub db: f64,
    /// The frequency.
    pub at_hz: f64,
}

impl From<Level> for LevelRecord {
    fn from(level: Level) -> LevelRecord {
        LevelRecord { db: 20.0 * level.magnitude.log10(), at_hz: level.w / TAU }
    }
}

/// The peak of an op-amp output.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct OpAmpRecord {
    /// The op-amp; `None` for the section's output where the op-amps are not known.
    pub name: Option<String>,
    /// Its peak.
    #[serde(flatten)]
    pub peak: LevelRecord,
}

/// One section.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct SectionOfFilter {
    /// The name.
    pub name: String,
    /// The shape.
    #[serde(serialize_with = "shape_name")]
    pub shape: Shape,
    /// The number of its poles.
    pub poles: usize,
    /// The number of its pair of zeros, where it has one.
    pub zeros: Option<usize>,
    /// Pole frequency.
    pub f0_hz: f64,
    /// Pole quality factor; `None` for first order.
    pub q: Option<f64>,
    /// Signed gain.
    pub gain: f64,
    /// Zero frequency of a notch.
    pub fz_hz: Option<f64>,
    /// The circuit.
    pub circuit: Option<String>,
    /// Whether the circuit gives this gain only.
    pub gain_is_fixed: bool,
    /// Whether every op-amp output was counted, or only the section's own.
    pub op_amps_counted: bool,
    /// The op-amp outputs.
    pub op_amps: Vec<OpAmpRecord>,
    /// The least level at its output in the pass band.
    pub least_in_pass_band: LevelRecord,
}

impl SectionOfFilter {
    /// The largest op-amp output.
    pub fn largest(&self) -> Option<&OpAmpRecord> {
        self.op_amps.iter().reduce(|a, b| if b.peak.db > a.peak.db { b } else { a })
    }
}

/// How the sections were put together.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct ChoiceRecord {
    /// `headroom`, `nearest`, `given`, or `none` where all zeros are alike.
    pub pairing: &'static str,
    /// Which pairings were compared: `one`, `all`, `exchanges` (from the better of two rules, as long as an exchange of
    /// two pairs of zeros helps), or `two`.
    pub pairings: &'static str,
    /// `headroom`, `rising-q`, `falling-q` or `given`.
    pub sequence: &'static str,
    /// Whether, for `headroom`, all orders were compared; otherwise the one that is best by the levels at gain 1, and those
    /// by rising and by falling Q.
    pub all_orders_compared: bool,
    /// `headroom`, `equal` or `given`.
    pub gains: &'static str,
    /// The peak at the output of the filter.
    pub output_peak: LevelRecord,
    /// The swing: the largest op-amp output over the least level of a section output in the pass band.
    pub swing: SwingRecord,
}

/// The swing of the cascade, and of others, in dB.
#[derive(Clone, Copy, Debug, PartialEq, Serialize)]
pub struct SwingRecord {
    /// Of this one.
    pub chosen_db: f64,
    /// Ordered by rising Q, the pairing the same, the gains for headroom.
    pub rising_q_db: f64,
    /// Ordered by falling Q.
    pub falling_q_db: f64,
    /// With the nearest zeros for the poles of highest Q, order and gains for headroom.
    pub nearest_zeros_db: Option<f64>,
}

impl SectionsRecord {
    /// The record of a filter; without a title it is named after what it is.
    pub fn new(title: &str, plan: &Filter, has_other_keys: bool) -> SectionsRecord {
        let parts = &plan.cascade.parts;
        let db = |ratio: f64| 20.0 * ratio.log10();
        let request = &plan.request;
        let swing = &plan.cascade.swing;
        let pairs_of_zeros = parts.zeros.iter().filter_map(|zeros| match zeros {
            Zeros::Pair(wz) => Some(*wz),
            _ => None,
        });
        let mut record = SectionsRecord {
            format: SECTIONS_FORMAT,
            title: title.to_string(),
            filter: filter_record(plan),
            poles: poles(plan),
            zeros: pairs_of_zeros.enumerate().map(|(k, wz)| NotchRecord { number: k + 1, fz_hz: wz / TAU }).collect(),
            sections: plan.cascade.sections.iter().zip(&plan.circuits).map(|(s, name)| section(s, name)).collect(),
            choice: ChoiceRecord {
                pairing: match request.pairing {
                    Pairing::Given(_) => "given",
                    _ if swing.nearest_zeros.is_none() => "none",
                    Pairing::Headroom => "headroom",
                    Pairing::Nearest => "nearest",
                },
                pairings: match plan.cascade.pairings {
                    Pairings::One => "one",
                    Pairings::All => "all",
                    Pairings::Exchanges => "exchanges",
                    Pairings::Two => "two",
                },
                sequence: match request.sequence {
                    Sequence::Headroom => "headroom",
                    Sequence::RisingQ => "rising-q",
                    Sequence::FallingQ => "falling-q",
                    Sequence::Given(_) => "given",
                },
                all_orders_compared: plan.cascade.has_all_orders,
                gains: match request.gains {
                    Gains::Headroom => "headroom",
                    Gains::Equal => "equal",
                    Gains::Given(_) => "given",
                },
                output_peak: plan.cascade.output.into(),
                swing: SwingRecord {
                    chosen_db: db(swing.chosen),
                    rising_q_db: db(swing.rising_q),
                    falling_q_db: db(swing.falling_q),
                    nearest_zeros_db: swing.nearest_zeros.map(db),
                },
            },
            has_other_keys,
        };
        if record.title.is_empty() {
            record.title = record.filter.name();
        }
        record
    }

    /// What the filter is, in sentences of one line each.
    pub fn summary(&self) -> Vec<String> {
        let filter = &self.filter;
        let what = if filter.delay_s.is_some() { "delay" } else { "edge" };
        vec![format!("{}; {what} {}.", filter.name(), filter.edge()), format!("Gain {}.", filter.gain_in_words())]
    }
}

impl FilterRecord {
    /// Approximation, response and order.
    pub fn name(&self) -> String {
        let name = self.approximation.name();
        let first: String = name.chars().take(1).flat_map(char::to_uppercase).collect();
        let rest: String = name.chars().skip(1).collect();
        let order = match self.poles {
            poles if poles == self.order => format!("order {}", self.order),
            poles => format!("order {} ({poles} poles)", self.order),
        };
        format!("{first}{rest} {}, {order}", self.response)
    }

    /// The edges and what holds there.
    pub fn edge(&self) -> String {
        if let Some(delay) = self.delay_s {
            return format!("{} at DC", level(delay, 6, "s"));
        }
        let level = self.edge_db.map_or(String::new(), |db| format!("{} dB", short(db, 5)));
        let reference =
            if self.peak_over_dc_db > 0.0 { format!(" under {}", self.reference_in_words()) } else { String::new() };
        let what = match self.edge_at {
            "ripple" => format!("end of the ripple band, {level} under the peak"),
            "attenuation" => format!("start of the stop band, -{level}{reference}"),
            "half-power" => format!("half power, -{level}{reference}"),
            _ => format!("-{level}{reference}"),
        };
        format!("{}: {what}", hertz(&self.edges_hz))
    }

    fn reference_in_words(&self) -> &'static str {
        match (self.reference, self.response) {
            ("peak", _) => "the peak",
            (_, "high-pass") => "the gain far above",
            (_, "band-pass") => "the gain at the centre",
            _ => "the gain at DC",
        }
    }

    /// The gain and where it holds.
    pub fn gain_in_words(&self) -> String {
        let place = match (self.reference, self.response) {
            ("peak", _) => "at the peak of the pass band",
            (_, "high-pass") => "far above the edge",
            (_, "band-pass") => "at the centre",
            _ => "at DC",
        };
        let db = 20.0 * self.gain.log10();
        let db = if db.abs() < 1e-9 { 0.0 } else { db };
        let gain = format!("{} ({} dB) {place}", short(self.gain, 6), short(db, 4));
        let other = match (self.reference, self.response) {
            _ if self.peak_over_dc_db <= 0.0 => return gain,
            ("peak", "high-pass") => "far above the edge it lies",
            ("peak", "band-pass") => "at the centre it lies",
            ("peak", _) => "at DC it lies",
            _ => "the peak lies",
        };
        let under = if self.reference == "peak" { "lower" } else { "higher" };
        format!("{gain}; {other} {} dB {under}", short(self.peak_over_dc_db, 5))
    }
}

/// Frequencies in words.
pub(super) fn hertz(list: &[f64]) -> String {
    list.iter().map(|f| level(*f, 6, "Hz")).collect::<Vec<_>>().join(" and ")
}

fn filter_record(plan: &Filter) -> FilterRecord {
    let (asked, design) = (&plan.specification, &plan.design);
    let edges = match asked.band {
        Band::LowPass(edge) | Band::HighPass(edge) => vec![edge],
        Band::BandPass(low, high) | Band::BandStop(low, high) => vec![low, high],
    };
    let in_hertz = |list: Vec<f64>| list.into_iter().map(|w| w / TAU).collect::<Vec<f64>>();
    let is_delay = asked.edge_at == EdgeAt::Delay;
    let half_power = 10.0 * 2f64.log10();
    let two = asked.band.doubles();
    FilterRecord {
        approximation: asked.approximation,
        response: asked.band.name(),
        order: design.order,
        poles: design.roots.order(),
        edges_hz: if is_delay { Vec::new() } else { in_hertz(edges.clone()) },
        edge_at: match asked.edge_at {
            EdgeAt::HalfPower => "half-power",
            EdgeAt::Ripple => "ripple",
            EdgeAt::Attenuation => "attenuation",
            EdgeAt::Decibels(_) => "level",
            EdgeAt::Delay => "delay",
        },
        edge_db: match asked.edge_at {
            EdgeAt::HalfPower => Some(half_power),
            EdgeAt::Ripple => asked.ripple,
            EdgeAt::Attenuation => asked.attenuation,
            EdgeAt::Decibels(db) => Some(db),
            EdgeAt::Delay => None,
        },
        delay_s: is_delay.then(|| 1.0 / edges[0]),
        ripple_db: asked.ripple,
        attenuation_db: asked.attenuation,
        reference: if asked.reference == Reference::Peak { "peak" } else { "dc" },
        gain: plan.cascade.gain,
        peak_over_dc_db: design.prototype.peak_db,
        half_power_hz: in_hertz(asked.frequencies_at(design, half_power)),
        inverts: plan.cascade.inverts(),
        stop_band: asked.stop_band.zip(design.attenuation).map(|(stop, least)| StopBandRecord {
            edges_hz: in_hertz(if two { vec![stop.edges.0, stop.edges.1] } else { vec![stop.edges.0] }),
            asked_db: stop.attenuation,
            least_db: least,
            margin_db: least - stop.attenuation,
            reached_hz: in_hertz(design.reached.clone()),
            order_is_least: asked.order.is_none(),
            smaller_order: design.smaller.map(|(order, _)| order),
            smaller_order_least_db: design.smaller.map(|(_, db)| db),
        }),
    }
}

/// The poles in the order of their numbers.
fn poles(plan: &Filter) -> Vec<PoleRecord> {
    let parts = &plan.cascade.parts;
    let all = parts.poles.iter().chain(parts.first_order.iter().map(|(poles, _)| poles));
    let mut left: Vec<Pole> = plan.design.roots.poles.clone();
    let record = |(index, figures): (usize, &PoleFigures)| {
        let found = left.iter().position(|pole| PoleFigures::from(*pole) == *figures);
        let (real, imaginary) = match found.map(|place| left.remove(place)) {
            Some(Pole::Pair(p)) => (vec![p.re], p.im),
            Some(Pole::Reals(a, b)) => (vec![a, b], 0.0),
            // A pole of its own, or one of two that were taken apart.
            Some(Pole::Real(_)) | None => (vec![-figures.w0], 0.0),
        };
        PoleRecord { number: index + 1, f0_hz: figures.w0 / TAU, q: figures.q, real, imaginary }
    };
    all.enumerate().map(record).collect()
}

fn section(of: &CascadeSection, circuit: &Option<String>) -> SectionOfFilter {
    let target = &of.section;
    let zeros = of.zeros.filter(|_| target.shape == Shape::Notch).map(|zeros| zeros + 1);
    SectionOfFilter {
        name: target.name.clone(),
        shape: target.shape,
        poles: of.poles + 1,
        zeros,
        f0_hz: target.w0 / TAU,
        q: target.q,
        gain: target.gain,
        fz_hz: target.wz.map(|wz| wz / TAU),
        circuit: circuit.clone(),
        gain_is_fixed: of.is_fixed,
        op_amps_counted: of.is_counted,
        op_amps: of
            .op_amps
            .iter()
            .map(|amp| OpAmpRecord {
                name: Some(amp.name.clone()).filter(|name| !name.is_empty()),
                peak: amp.peak.into(),
            })
            .collect(),
        least_in_pass_band: of.least.into(),
    }
}

/// A shape by its name in running text, as all JSON formats have it.
fn shape_name<S: Serializer>(shape: &Shape, serializer: S) -> Result<S::Ok, S::Error> {
    serializer.serialize_str(shape.name())
}
