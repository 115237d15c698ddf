//! The dielectric of a capacitor.

use std::fmt;

/// What a capacitor is made of, as far as its behaviour depends on it.
///
/// ```
/// use roundwell::parts::{Dielectric, DielectricClass};
///
/// assert_eq!(Dielectric::read("X7R").class(), Some(DielectricClass::Two));
/// assert_eq!(Dielectric::read("NP0"), Dielectric::read("C0G"));
/// assert_eq!(Dielectric::read("PP").class(), None);
/// ```
#[derive(Clone, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Dielectric {
    /// A ceramic with a code of EIA-198 or IEC 60384.
    Ceramic {
        /// The class that the code belongs to.
        class: DielectricClass,
        /// The code in capitals; `NP0`, `NPO` and `COG` are `C0G`.
        code: String,
    },
    /// A film.
    Film(Film),
    /// Mica.
    Mica,
    /// An electrolytic, aluminium or tantalum.
    Electrolytic,
    /// Anything else, as it was written.
    Other(String),
}

/// The class of a ceramic dielectric (IEC 60384-8 and -21 for class 1, -9 and -22 for class 2; EIA-198).
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum DielectricClass {
    /// A nearly linear, stable capacitance: C0G, U2J.
    One,
    /// A capacitance that depends on temperature, voltage and age: X7R, X5R, X7S, Y5V, Z5U.
    Two,
}

/// The films of capacitors.
#[derive(Clone, Copy, Debug, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Film {
    /// Polypropylene, PP.
    Polypropylene,
    /// Polyethylene terephthalate (polyester), PET.
    PolyethyleneTerephthalate,
    /// Polyethylene naphthalate, PEN.
    PolyethyleneNaphthalate,
    /// Polyphenylene sulphide, PPS.
    PolyphenyleneSulphide,
    /// Polystyrene, PS.
    Polystyrene,
    /// Polycarbonate, PC.
    Polycarbonate,
}

/// The words in capitals by which films are known.
const FILMS: [(Film, &[&str]); 6] = [
    (Film::Polypropylene, &["PP", "POLYPROPYLENE", "MKP"]),
    (Film::PolyethyleneTerephthalate, &["PET", "POLYESTER", "MKT"]),
    (Film::PolyethyleneNaphthalate, &["PEN"]),
    (Film::PolyphenyleneSulphide, &["PPS"]),
    (Film::Polystyrene, &["PS", "POLYSTYRENE"]),
    (Film::Polycarbonate, &["PC", "POLYCARBONATE", "MKC"]),
];

impl Dielectric {
    /// Reads the name of a dielectric; every text has a reading.
    ///
    /// Known are the codes of EIA-198 (`C0G`, `U2J`, `X7R`), the letter-figure codes of IEC 60384 for class 2 (`2R1`)
    /// and the older names of class 1 (`NP0`, `N750`), films by abbreviation or name (`PP`, `polyester`, `MKT`),
    /// `mica`, `electrolytic`, `tantalum`, in either case. Other words may stand beside, such as `X7R ceramic`; where
    /// two known words disagree, or none is known, the text is kept as [`Dielectric::Other`].
    pub fn read(text: &str) -> Dielectric {
        let capitals = text.trim().to_uppercase();
        let words = capitals.split(|sign: char| !sign.is_alphanumeric());
        let mut known = words.filter_map(of_word);
        match known.next() {
            Some(first) if known.all(|next| next == first) => first,
            _ => Dielectric::Other(text.trim().to_owned()),
        }
    }

    /// The class of a ceramic; none for anything else, and for what is not known.
    pub fn class(&self) -> Option<DielectricClass> {
        match self {
            Dielectric::Ceramic { class, .. } => Some(*class),
            _ => None,
        }
    }
}

impl Film {
    /// The abbreviation of the material: `PP`.
    pub fn name(self) -> &'static str {
        match self {
            Film::Polypropylene => "PP",
            Film::PolyethyleneTerephthalate => "PET",
            Film::PolyethyleneNaphthalate => "PEN",
            Film::PolyphenyleneSulphide => "PPS",
            Film::Polystyrene => "PS",
            Film::Polycarbonate => "PC",
        }
    }
}

impl fmt::Display for Dielectric {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(match self {
            Dielectric::Ceramic { code, .. } => code,
            Dielectric::Film(film) => film.name(),
            Dielectric::Mica => "mica",
            Dielectric::Electrolytic => "electrolytic",
            Dielectric::Other(name) => name,
        })
    }
}

impl fmt::Display for DielectricClass {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        f.pad(match self {
            DielectricClass::One => "class 1",
            DielectricClass::Two => "class 2",
        })
    }
}

/// A single word in capitals.
fn of_word(word: &str) -> Option<Dielectric> {
    if let Some((film, _)) = FILMS.iter().find(|(_, words)| words.contains(&word)) {
        return Some(Dielectric::Film(*film));
    }
    match word {
        "MICA" => return Some(Dielectric::Mica),
        "ELECTROLYTIC" | "TANTALUM" | "ALUMINIUM" | "ALUMINUM" => return Some(Dielectric::Electrolytic),
        _ => {}
    }
    let code = if ["NP0", "NPO", "COG"].contains(&word) { "C0G" } else { word };
    let class = class_of(code)?;
    Some(Dielectric::Ceramic { class, code: code.to_owned() })
}

/// The class of a code in capitals. The letters and figures are those of EIA-198 and IEC 60384, from memory.
fn class_of(code: &str) -> Option<DielectricClass> {
    // The older names of class 1: the mean temperature coefficient, N for negative.
    const OLDER: [&str; 8] = ["N33", "N75", "N150", "N220", "N330", "N470", "N750", "P100"];
    if OLDER.contains(&code) {
        return Some(DielectricClass::One);
    }
    let &[first, second, third] = code.as_bytes() else { return None };
    // EIA-198, class 1: mean temperature coefficient, its multiplier, its spread.
    let class_1 = b"CBLAMPRSTVU".contains(&first) && b"01234678".contains(&second) && b"GHJKLMN".contains(&third);
    // EIA-198: lowest temperature, highest temperature, largest change of the capacitance.
    let eia = b"XYZ".contains(&first) && b"2456789".contains(&second) && b"ABCDEFPRSTUVL".contains(&third);
    // IEC 60384: class, largest change, range of temperature.
    let iec = first == b'2' && b"BCDEFRX".contains(&second) && b"123456".contains(&third);
    match (class_1, eia || iec) {
        (true, _) => Some(DielectricClass::One),
        (_, true) => Some(DielectricClass::Two),
        _ => None,
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    // Source: EIA-198 and IEC 60384, from memory.
    #[test]
    fn ceramics_have_their_class() {
        let class = |text| Dielectric::read(text).class();
        for text in ["C0G", "COG", "NP0", "npo", "C0G (NP0)", "U2J", "N750", "S2L", "R2H", "M7G", "ceramic C0G"] {
            assert_eq!(class(text), Some(DielectricClass::One), "{text}");
        }
        for text in
            ["X7R", "x5r", "X7S", "X6S", "X7T", "X8R", "X8L", "Y5V", "Y5P", "Z5U", "2R1", "2F4", "X7R/MLCC", " X7R "]
        {
            assert_eq!(class(text), Some(DielectricClass::Two), "{text}");
        }
        for text in ["ceramic", "X7", "X7RR", "X3R", "XR7", "C0Z", "C5G", "7XR", "2G1", "PP", "", "Ω7R", "X7R C0G"] {
            assert_eq!(class(text), None, "{text}");
        }
        assert_eq!(Dielectric::read("npo").to_string(), "C0G");
        assert_eq!([DielectricClass::One, DielectricClass::Two].map(|c| c.to_string()), ["class 1", "class 2"]);
    }

    // Common practice.
    #[test]
    fn films_and_others_have_their_names() {
        for (texts, shown) in [
            ("PP|polypropylene|film, PP|MKP", "PP"),
            ("PET|Polyester|mkt", "PET"),
            ("PEN", "PEN"),
            ("PPS|pps film", "PPS"),
            ("PS|polystyrene", "PS"),
            ("PC|polycarbonate", "PC"),
            ("mica|silver mica", "mica"),
            ("electrolytic|tantalum|aluminium|aluminum electrolytic", "electrolytic"),
        ] {
            for text in texts.split('|') {
                let read = Dielectric::read(text);
                assert_eq!(read.to_string(), shown, "{text}");
                assert!(!matches!(read, Dielectric::Other(_)));
            }
        }
        for text in ["paper in oil", "PP/PET", "film"] {
            assert_eq!(Dielectric::read(text), Dielectric::Other(text.to_owned()));
        }
    }
}
