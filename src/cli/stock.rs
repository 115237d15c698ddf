//! `roundwell stock`: a stock list read back.

use std::path::Path;

use super::args::{ShowFormat, StockArgs};
use super::failure::Failure;
use super::files::{read_bytes, read_text};
use super::output::Output;
use super::{FOUND, NOTHING_WITHIN_LIMITS};
use crate::parts::{Stock, Supply};
use crate::report::{
    NeedRecord, Quantity, StockRecord, printable, write_need_json, write_need_table, write_stock_json,
    write_stock_table,
};
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
    if let Some(shortlist) = &args.need {
        return need(args, (&name, &stock), shortlist);
    }
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

/// What a row of a shortlist needs; lines that cannot be used are as if they were not there, and said to be so.
fn need(args: &StockArgs, (name, stock): (&str, &Stock), shortlist: &Path) -> Result<u8, Failure> {
    let json = read_text(shortlist)?;
    let supply = Supply::of_stock(stock);
    let quantity = Quantity { boards: args.boards, spares: args.spares };
    let row = usize::try_from(args.row).unwrap_or(usize::MAX);
    let record =
        NeedRecord::new((name, &supply), (&name_of(shortlist), &json), row, quantity).map_err(Failure::input)?;
    let mut bytes = Vec::new();
    let written = match args.format {
        ShowFormat::Table => write_need_table(&record, usize::from(args.width), &mut bytes),
        ShowFormat::Json => write_need_json(&record, &mut bytes),
    };
    written.map_err(|error| Failure::Unwritable(error.to_string()))?;
    Output::open(args.out.as_deref())?.write(&bytes)?;
    if !stock.faults.is_empty() {
        let message = printable(&format!("lines of {name} that cannot be used were left out"));
        return Err(Failure::input(Fault::at("", message).help(format!("see roundwell stock {name}"))));
    }
    Ok(if record.short == 0 { FOUND } else { NOTHING_WITHIN_LIMITS })
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
