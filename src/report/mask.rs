//! A mask as it stands in the JSON of a shortlist, so that the list can be vetted without its mask file.

use serde::Serialize;

use super::vet::hertz;
use crate::analysis::{Figure, FigureLimit, Limit, Mask, Reference};
use crate::target::Section;

/// What a board has to keep.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct MaskRecord {
    /// To what the decibels relate: `absolute`, `dc`, `peak` or `frequency`.
    pub reference: &'static str,
    /// That frequency, Hz.
    pub reference_hz: Option<f64>,
    /// Limits of the magnitude, dB.
    pub limits: Vec<PieceOfMask>,
    /// Limits of the group delay, s.
    pub delays: Vec<PieceOfMask>,
    /// Limits of the figures of single sections.
    pub figures: Vec<FiguresOfMask>,
}

/// A limit over a range of frequencies.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct PieceOfMask {
    /// Where it begins, Hz.
    pub from_hz: f64,
    /// Where it ends, Hz.
    pub to_hz: f64,
    /// Its lower side.
    pub lower: Option<f64>,
    /// Its upper side.
    pub upper: Option<f64>,
}

/// The limits of one section's figures, each from lowest to highest.
#[derive(Clone, Debug, PartialEq, Serialize)]
pub struct FiguresOfMask {
    /// The section.
    pub section: String,
    /// Pole frequency, Hz.
    pub f0_hz: Option<[f64; 2]>,
    /// Pole quality factor.
    pub q: Option<[f64; 2]>,
    /// Zero frequency of a notch, Hz.
    pub fz_hz: Option<[f64; 2]>,
    /// The least depth of a notch, dB.
    pub depth_db: Option<f64>,
}

/// The name of a reference, and its frequency in Hz.
pub(super) fn reference(reference: Reference) -> (&'static str, Option<f64>) {
    match reference {
        Reference::Absolute => ("absolute", None),
        Reference::Dc => ("dc", None),
        Reference::Peak => ("peak", None),
        Reference::At(w) => ("frequency", Some(hertz(w))),
    }
}

impl MaskRecord {
    /// The record of a mask for these sections.
    pub fn new(mask: &Mask, sections: &[Section]) -> MaskRecord {
        let piece = |limit: &Limit| PieceOfMask {
            from_hz: hertz(limit.from),
            to_hz: hertz(limit.to),
            lower: limit.lower,
            upper: limit.upper,
        };
        let (reference, reference_hz) = reference(mask.reference);
        let figures = sections.iter().enumerate().filter_map(|(index, section)| {
            let limits: Vec<&FigureLimit> = mask.figures.iter().filter(|limit| limit.section == index).collect();
            let of = |figure: Figure| limits.iter().find(|limit| limit.figure == figure);
            let range = |figure: Figure, shown: fn(f64) -> f64| {
                of(figure).and_then(|limit| Some([shown(limit.lower?), shown(limit.upper?)]))
            };
            (!limits.is_empty()).then(|| FiguresOfMask {
                section: section.name.clone(),
                f0_hz: range(Figure::F0, hertz),
                q: range(Figure::Q, |q| q),
                fz_hz: range(Figure::Fz, hertz),
                depth_db: of(Figure::Depth).and_then(|limit| limit.lower),
            })
        });
        MaskRecord {
            reference,
            reference_hz,
            limits: mask.limits.iter().map(piece).collect(),
            delays: mask.delays.iter().map(piece).collect(),
            figures: figures.collect(),
        }
    }
}
