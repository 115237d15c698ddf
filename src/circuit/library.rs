//! The circuits that come with the program, embedded at build time.

use std::sync::OnceLock;

use super::netlist::Circuit;

include!(concat!(env!("OUT_DIR"), "/circuits.rs"));

/// The embedded circuits, by identifier.
///
/// A file that does not parse is a fault of this crate, which the crate's tests exclude; it would be left out.
pub fn library() -> &'static [Circuit] {
    static LIBRARY: OnceLock<Vec<Circuit>> = OnceLock::new();
    LIBRARY.get_or_init(|| {
        let mut circuits: Vec<Circuit> = FILES.iter().filter_map(|(_, text)| Circuit::parse(text).ok()).collect();
        circuits.sort_by(|a, b| a.id.cmp(&b.id));
        circuits
    })
}

/// The embedded circuit of that identifier.
pub fn find(id: &str) -> Option<&'static Circuit> {
    library().iter().find(|c| c.id == id)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_embedded_file_is_usable_and_named_after_its_circuit() {
        for (name, text) in FILES {
            match Circuit::parse(text) {
                Ok(circuit) => assert_eq!(format!("{}.ron", circuit.id), *name),
                Err(error) => panic!("{name}: {:?}", error.faults),
            }
        }
        assert_eq!(library().len(), FILES.len());
    }
}
