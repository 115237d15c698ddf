//! `roundwell stock`: a stock list read back.

use std::path::Path;

use super::FOUND;
use super::args::{ShowFormat, StockArgs};
use super::failure::Failure;
use super::files::read_bytes;
use super::output::Output;
use crate::parts::Stock;
use crate::report::{StockRecord, printable, write_stock_json, write_stock_table};
use crate::text::Fault;

/// Runs the command and gives its exit code.
///
/// # Errors
/// A file that cannot be read or is no stock list, an output that cannot be written; and, once the other lines are
/// written, lines that cannot be used.
pub fn run(args: &StockArgs) -> Result<u8, Failure> {
    let name = name_of(&args.file);
    let bytes = read_bytes(&args.file)?;
    let stock = Stock::read(&bytes).map_err(|error| {
        let message = printable(&format!("{name}: {error}"));
        Failure::input(Fault::at("", message))
    })?;
    let record = StockRecord::new(&name, &stock);
    Output::open(args.out.as_deref())?.write(&written(&record, args.format, usize::from(args.width))?)?;
    match record.faulty_lines {
        0 => Ok(FOUND),
        faulty => {
            let lines = if faulty == 1 { "1 line".to_string() } else { format!("{faulty} lines") };
            let message = printable(&format!("{lines} of {name} cannot be used"));
            Err(Failure::input(Fault::at("", message).help("what is wrong stands below the lines that can be used")))
        }
    }
}

fn name_of(path: &Path) -> String {
    if path == Path::new("-") { "standard input".to_string() } else { path.display().to_string() }
}

/// The record in the wanted format.
fn written(record: &StockRecord, format: ShowFormat, width: usize) -> Result<Vec<u8>, Failure> {
    let mut bytes = Vec::new();
    let result = match format {
        ShowFormat::Table => write_stock_table(record, width, &mut bytes),
        ShowFormat::Json => write_stock_json(record, &mut bytes),
    };
    result.map_err(|error| Failure::Unwritable(error.to_string()))?;
    Ok(bytes)
}
