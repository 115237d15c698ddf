//! Reading: job files, circuit files and stock lists.

use std::collections::BTreeMap;
use std::fs::File;
use std::io::{self, Read};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use super::failure::{Failure, Faulty};
use crate::circuit::{Circuit, find};
use crate::parts::Stock;
use crate::report::printable;
use crate::text::Fault;

/// No text file is longer, in bytes; so a device that never ends is not read forever.
const LONGEST: u64 = 4_000_000;

/// Reads a text, from standard input if the path is `-`.
///
/// # Errors
/// What cannot be opened or read, is a directory, is too long, or is not UTF-8.
pub fn read_text(path: &Path) -> Result<String, Failure> {
    String::from_utf8(read_bytes(path)?).map_err(|error| {
        let place = error.utf8_error().valid_up_to();
        let message = format!("{} is not UTF-8 text: see byte {}", path.display(), place + 1);
        Failure::input(Fault::at("", message).help("save it as UTF-8"))
    })
}

/// Reads a file, from standard input if the path is `-`.
///
/// # Errors
/// What cannot be opened or read, is a directory, or is too long.
pub fn read_bytes(path: &Path) -> Result<Vec<u8>, Failure> {
    let mut bytes = Vec::new();
    let read = if path == Path::new("-") {
        io::stdin().lock().take(LONGEST + 1).read_to_end(&mut bytes)
    } else {
        File::open(path).and_then(|file| file.take(LONGEST + 1).read_to_end(&mut bytes))
    };
    read.map_err(|error| Failure::reading(path, &error))?;
    if bytes.len() as u64 > LONGEST {
        let message = format!("{} is longer than {LONGEST} bytes", path.display());
        return Err(Failure::input(Fault::at("", message).help("is it a text file?")));
    }
    Ok(bytes)
}

/// Reads a stock list that a job draws on; what is wrong with single lines is left in it.
///
/// # Errors
/// What cannot be read, or is no stock list; without its place.
pub fn read_stock(path: &Path) -> Result<Stock, Fault> {
    let bytes = read_bytes(path).map_err(Failure::into_fault)?;
    let name = if path == Path::new("-") { "standard input".to_string() } else { path.display().to_string() };
    Stock::read(&bytes).map_err(|error| {
        let help = "name a CSV file with a header such as kind,value,quantity; `roundwell stock FILE` reads one back";
        Fault::at("", printable(&format!("{name}: {error}"))).help(help)
    })
}

/// Whether a circuit is named by a file.
pub fn is_file_name(name: &str) -> bool {
    name.ends_with(".ron") || name.contains(std::path::is_separator)
}

/// Reads a circuit file.
///
/// # Errors
/// Those of [`read_text`], and all faults of the circuit.
pub fn read_circuit(path: &Path) -> Result<Circuit, Failure> {
    let text = read_text(path)?;
    Circuit::parse(&text).map_err(|error| {
        // What the network gives is checked only where its text is sound, whose faults have no path.
        let is_first_round = error.faults.iter().all(|fault| fault.path.is_empty());
        Failure::Input(vec![Faulty { file: path.display().to_string(), text, faults: error.faults, is_first_round }])
    })
}

/// The circuits of a job: those of the library, and files that the job names.
#[derive(Debug, Default)]
pub struct Circuits {
    /// The folder from which files are named.
    pub folder: PathBuf,
    /// What was found, by name.
    known: BTreeMap<String, Result<Arc<Circuit>, String>>,
    /// What is wrong with files, each once.
    pub faulty: Vec<Faulty>,
}

impl Circuits {
    /// Circuits whose files are named from `folder`.
    pub fn new(folder: PathBuf) -> Circuits {
        Circuits { folder, ..Circuits::default() }
    }

    /// The circuit of a name.
    ///
    /// # Errors
    /// What is wrong, in a sentence; what is wrong within a circuit file is kept in `faulty`.
    pub fn get(&mut self, name: &str) -> Result<Arc<Circuit>, String> {
        if let Some(known) = self.known.get(name) {
            return known.clone();
        }
        let found = if is_file_name(name) { self.load(name) } else { library(name) };
        self.known.insert(name.to_string(), found.clone());
        found
    }

    fn load(&mut self, name: &str) -> Result<Arc<Circuit>, String> {
        match read_circuit(&self.folder.join(name)) {
            Ok(circuit) => Ok(Arc::new(circuit)),
            Err(Failure::Input(texts)) => {
                self.faulty.extend(texts);
                Err(format!("the circuit file {name} cannot be used"))
            }
            Err(other) => Err(other.show(false)),
        }
    }
}

fn library(name: &str) -> Result<Arc<Circuit>, String> {
    find(name).cloned().map(Arc::new).ok_or_else(|| format!("there is no circuit `{name}`"))
}
