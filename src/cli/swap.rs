//! `roundwell swap`: replacements for parts of a built section that are gone.

use std::collections::BTreeMap;
use std::time::Instant;

use super::args::{DrawerArgs, GoalArgs, PartsArgs, ShortlistArgs, ShowFormat, SwapArgs};
use super::failure::Failure;
use super::output::Output;
use super::progress::Watch;
use super::settings::Settings;
use super::{FOUND, INTERRUPTED, NOTHING_WITHIN_LIMITS};
use crate::parts::Choice;
use crate::report::{SwapRecord, write_swap_json, write_swap_table};
use crate::search::{Problem, Reference, SectionProblem, StopReason, SwapProblem, replacements};
use crate::text::{Fault, suggestion};
use crate::units::{Kind, Value};
use crate::verify::verify_replacements;

/// Runs the command and gives its exit code.
///
/// # Errors
/// Bad input, an output that cannot be written, a result that fails its check.
pub fn run(args: &SwapArgs) -> Result<u8, Failure> {
    let (built, open) = Settings::built_and_open(&as_shortlist(args))?;
    let problem = problem(args, &built.problem, &open.problem)?;
    let output = Output::open(args.out.as_deref())?;
    let watch = Watch::start(open.time_limit, &problem.criterion.measure);
    let start = Instant::now();
    let found = replacements(&problem, &watch);
    let seconds = start.elapsed().as_secs_f64();
    watch.finish();
    let Some(found) = found else {
        let message = format!(
            "section {} as built is no stable {}: there is nothing to compare replacements with",
            problem.built.target.name,
            problem.built.target.shape.name()
        );
        return Err(Failure::input(Fault::at("", message).help("check the pins against the board")));
    };
    verify_replacements(&problem, &found).map_err(Failure::Unverified)?;
    let record = SwapRecord::new(&built.problem.title, &problem, &found, seconds);
    let mut bytes = Vec::new();
    let written = match args.format {
        ShowFormat::Table => write_swap_table(&record, usize::from(args.width), &mut bytes),
        ShowFormat::Json => write_swap_json(&record, &mut bytes),
    };
    written.map_err(|error| Failure::Unwritable(error.to_string()))?;
    output.write(&bytes)?;
    Ok(match found.stopped {
        Some(StopReason::Interrupted) => INTERRUPTED,
        _ if found.rows.is_empty() => NOTHING_WITHIN_LIMITS,
        _ => FOUND,
    })
}

/// The flags that `shortlist` has too.
fn as_shortlist(args: &SwapArgs) -> ShortlistArgs {
    ShortlistArgs {
        job: Some(args.job.clone()),
        parts: PartsArgs {
            resistors: args.resistors.clone(),
            capacitors: args.capacitors.clone(),
            ..PartsArgs::default()
        },
        stock: DrawerArgs {
            stock: args.stock.clone(),
            skip_bad_lines: args.skip_bad_lines,
            boards: args.boards.clone(),
            buy: args.buy.clone(),
            bar_class_2: args.bar_class_2,
            ..DrawerArgs::default()
        },
        goals: GoalArgs {
            error_limit: args.error_limit.clone(),
            time_limit: args.time_limit.clone(),
            ..GoalArgs::default()
        },
        ..ShortlistArgs::default()
    }
}

/// The section concerned, with its slots.
fn problem(args: &SwapArgs, built: &Problem, open: &Problem) -> Result<SwapProblem, Failure> {
    let mut faults = Vec::new();
    let mut gone: Vec<(usize, usize)> = Vec::new();
    for word in &args.gone {
        match place(word, &built.sections) {
            Ok(place) => gone.push(place),
            Err(fault) => faults.push(fault),
        }
    }
    gone.sort_unstable();
    gone.dedup();
    let index = gone.first().map_or(0, |(section, _)| *section);
    if gone.iter().any(|(section, _)| *section != index) {
        let message = "the parts that are gone belong to several sections";
        faults.push(Fault::at("--gone", message).help("replace them one section at a time"));
    }
    let (as_built, free) = (&built.sections[index], &open.sections[index]);
    let filled: Vec<usize> = as_built.output().filled(&as_built.circuit).collect();
    let unpinned: Vec<&str> = filled
        .iter()
        .filter(|&&slot| as_built.shelves[slot].len() != 1)
        .map(|&slot| as_built.circuit.slots[slot].name.as_str())
        .collect();
    if !unpinned.is_empty() && faults.is_empty() {
        let (what, is) = if unpinned.len() == 1 { ("slot", "is") } else { ("slots", "are") };
        let (names, section) = (unpinned.join(", "), &as_built.target.name);
        let message = format!("{what} {names} of section {section} {is} not pinned");
        let example = format!("write slots: {{\"{}\": (pin: \"10k\"), ...}} with what is built in", unpinned[0]);
        faults.push(Fault::at("", message).help(example));
    }
    if !faults.is_empty() {
        return Err(Failure::inputs(faults));
    }
    let mut supply = open.supply.clone();
    let mut section = SectionProblem { pairs: free.pairs.clone(), ..as_built.clone() };
    section.pairs.most = 0;
    if supply.has_stock() {
        // Slots of one value hold one part number, tied or not.
        let mut known: BTreeMap<(Kind, Value), Choice> = BTreeMap::new();
        for &slot in &filled {
            let (kind, value) = (section.shelves[slot].kind(), section.shelves[slot].choices()[0].value);
            let kept = *known.entry((kind, value)).or_insert_with(|| supply.keep(kind, value));
            if let Some(shelf) = section.shelves[slot].replaced(kept) {
                section.shelves[slot] = shelf;
            }
        }
    }
    Ok(SwapProblem {
        built: section,
        open: free.shelves.clone(),
        gone: gone.into_iter().map(|(_, slot)| slot).collect(),
        others: usize::from(args.others),
        rows: usize::from(args.rows),
        reference: if args.rank == "target" { Reference::Target } else { Reference::Built },
        criterion: open.criterion,
        error_limit: open.goals.error_limit,
        supply,
    })
}

/// The section and the slot that a word names.
fn place(word: &str, sections: &[SectionProblem]) -> Result<(usize, usize), Fault> {
    const FLAG: &str = "--gone";
    let (section, name) = word.split_once(':').map_or((None, word), |(section, name)| (Some(section), name));
    let index = match section {
        Some(wanted) => sections.iter().position(|s| s.target.name == wanted).ok_or_else(|| {
            let names: Vec<&str> = sections.iter().map(|s| s.target.name.as_str()).collect();
            Fault::at(FLAG, format!("there is no section {wanted}")).help(suggestion(
                wanted,
                "the sections are",
                &names,
            ))
        })?,
        None if sections.len() == 1 => 0,
        None => {
            let message = format!("`{name}` could be in any of {} sections", sections.len());
            let first = &sections[0].target.name;
            return Err(Fault::at(FLAG, message).help(format!("write SECTION:SLOT, such as {first}:{name}")));
        }
    };
    let section = &sections[index];
    let names: Vec<&str> =
        section.output().filled(&section.circuit).map(|slot| section.circuit.slots[slot].name.as_str()).collect();
    if !names.contains(&name) {
        let message = format!("{} has no part `{name}`", section.circuit.id);
        return Err(Fault::at(FLAG, message).help(suggestion(name, "its slots are", &names)));
    }
    Ok((index, section.circuit.slot(name).unwrap_or_default()))
}
