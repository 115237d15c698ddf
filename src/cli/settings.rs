//! From flags to settings: what the flags say is laid over the job file.

use std::path::{Path, PathBuf};
use std::time::Duration;

use super::args::{DrawerArgs, GoalArgs, PartsArgs, SectionArgs, ShortlistArgs, shape_flag};
use super::failure::{Failure, Faulty};
use super::files::{Circuits, is_file_name, read_stock, read_text};
use super::vet::mask_of;
use crate::analysis::{Mask, Order};
use crate::job::{
    Given, Job, JobFile, Joints, MeasureFile, PairsFile, RankFile, Scalar, Scalars, SectionFile, ShelfFile, Shelves,
    Sign, SlotFile, Slots, Untie, resolve,
};
use crate::parts::Stock;
use crate::search::{Joint, Problem};
use crate::target::{Section, Shape};
use crate::text::{Fault, located};

/// A job that can be searched.
#[derive(Debug)]
pub struct Settings {
    /// What is searched.
    pub problem: Problem,
    /// How long.
    pub time_limit: Option<Duration>,
    /// What a board has to keep, where the job or a flag names a mask.
    pub mask: Option<Mask>,
    /// What the rows are put in order by once their yields are known.
    pub order: Order,
}

impl Settings {
    /// Reads the job file, lays the flags over it, and resolves everything.
    ///
    /// # Errors
    /// All faults of the job file, of the circuit files that it names, and of the flags.
    pub fn new(args: &ShortlistArgs) -> Result<Settings, Failure> {
        let source = args.job.as_deref().map(Source::read).transpose()?.unwrap_or_default();
        Settings::of(&source, args, |_| {})
    }

    /// A job as it is built, without its stock, and the same with all pins lifted.
    ///
    /// # Errors
    /// Those of [`Settings::new`].
    pub fn built_and_open(args: &ShortlistArgs) -> Result<(Settings, Settings), Failure> {
        let source = args.job.as_deref().map(Source::read).transpose()?.unwrap_or_default();
        let built = Settings::of(&source, args, |job| {
            // What is built in is there, whatever the stock says.
            (job.stock, job.skip_bad_lines, job.boards, job.spares) = (None, None, None, None);
            (job.buy, job.bar_class_2, job.rank, job.mask) = (None, None, None, None);
        })?;
        let open = Settings::of(&source, args, |job| {
            (job.mask, job.rank) = (None, job.rank.take().filter(|rank| rank.value.order() == Order::AsFound));
            let slots = job.sections.iter_mut().flat_map(|sections| &mut sections.value).flat_map(|s| &mut s.slots);
            slots.flat_map(|slots| &mut slots.value.0).for_each(|(_, slot)| slot.pin = None);
        })?;
        Ok((built, open))
    }

    fn of(source: &Source, args: &ShortlistArgs, edit: impl Fn(&mut JobFile)) -> Result<Settings, Failure> {
        let mut job = source.job()?;
        let mut faults = lay_over(&mut job, args);
        if source.path.is_some() {
            faults.extend(section_flags(&args.section).into_iter().map(|flag| {
                let message = format!("describes a section, but {} has its own", source.name);
                Fault::at(flag, message).help("leave the flag out, or the job file")
            }));
        } else {
            match one_section(&args.section) {
                Ok(section) => {
                    let title = section.shape.as_ref().map(|shape| format!("{} section", shape.value.name()));
                    let title = title.map(|title| Given::flag("--title", title.as_str()));
                    job.title = job.title.or(title);
                    job.sections = Some(Given { value: vec![section], flag: None });
                }
                Err(more) => {
                    faults.extend(more);
                    // Where nothing is given, nothing is there to be checked.
                    let is_first_round = !section_flags(&args.section).is_empty();
                    return Err(source.failure(faults, Vec::new(), is_first_round));
                }
            }
        }
        edit(&mut job);
        let mut circuits = Circuits::new(source.folder());
        let stock = noted(&mut faults, source.stock(&job));
        let mask = noted(&mut faults, source.mask(&job));
        let resolved = resolve(&job, &mut |name| circuits.get(name), stock.as_ref());
        if let Some(given) = &job.rank
            && given.value.order() != Order::AsFound
            && !args.yields.yields
        {
            let path = given.flag.unwrap_or("rank");
            let message = "rows are ranked by yield or spread only where these are computed";
            faults.push(Fault::at(path, message).help("add --yield"));
        }
        let (problem, time_limit, order) = match resolved {
            Ok(Job { problem, time_limit, order }) if faults.is_empty() => (problem, time_limit, order),
            resolved => {
                faults.extend(resolved.err().unwrap_or_default());
                return Err(source.failure(faults, circuits.faulty, false));
            }
        };
        // What a mask may limit is known once the sections are.
        let targets: Vec<Section> = problem.sections.iter().map(|section| section.target.clone()).collect();
        let mask = mask.map(|(path, text)| mask_of(&path, &text, &targets)).transpose()?;
        Ok(Settings { problem, time_limit, mask, order })
    }
}

/// The job file as read; empty where there is none.
#[derive(Debug, Default)]
pub(super) struct Source {
    pub path: Option<PathBuf>,
    name: String,
    text: String,
}

impl Source {
    pub fn read(path: &Path) -> Result<Source, Failure> {
        let name = if path == Path::new("-") { "standard input".to_string() } else { path.display().to_string() };
        Ok(Source { path: Some(path.to_path_buf()), name, text: read_text(path)? })
    }

    pub fn job(&self) -> Result<JobFile, Failure> {
        match self.path {
            Some(_) => JobFile::parse(&self.text).map_err(|faults| self.failure(faults, Vec::new(), true)),
            None => Ok(JobFile::default()),
        }
    }

    /// The folder from which the job names circuit files: its own.
    pub fn folder(&self) -> PathBuf {
        self.path.as_deref().and_then(Path::parent).map(Path::to_path_buf).unwrap_or_default()
    }

    /// A file that the job names: from its own folder, or by a flag from the working folder.
    fn named(&self, given: &Given<Scalar>, key: &'static str, what: &str) -> Result<PathBuf, Fault> {
        let Given { value, flag } = given;
        if value.text() == "-" && self.path.as_deref() == Some(Path::new("-")) {
            let message = format!("the job and the {what} cannot both come from standard input");
            return Err(Fault::at(flag.unwrap_or(key), message).help("name one of them as a file"));
        }
        Ok(match flag {
            Some(_) => PathBuf::from(value.text()),
            None => self.folder().join(value.text()),
        })
    }

    /// The stock list that the job names.
    fn stock(&self, job: &JobFile) -> Option<Result<Stock, Fault>> {
        let given = job.stock.as_ref()?;
        let at = |fault| Fault { path: given.flag.unwrap_or("stock").to_string(), ..fault };
        Some(self.named(given, "stock", "stock list").and_then(|path| read_stock(&path).map_err(at)))
    }

    /// The mask file that the job names, and its text.
    fn mask(&self, job: &JobFile) -> Option<Result<(PathBuf, String), Fault>> {
        let given = job.mask.as_ref()?;
        let read = |path: PathBuf| match read_text(&path) {
            Ok(text) => Ok((path, text)),
            Err(failure) => Err(Fault { path: given.flag.unwrap_or("mask").to_string(), ..failure.into_fault() }),
        };
        Some(self.named(given, "mask", "mask").and_then(read))
    }

    /// Faults of the job, and before them those of the circuit files that it names.
    pub fn failure(&self, faults: Vec<Fault>, mut others: Vec<Faulty>, is_first_round: bool) -> Failure {
        let faults = match self.path {
            Some(_) => located(&self.text, faults),
            None => faults.into_iter().map(without_file).collect(),
        };
        others.push(Faulty { file: self.name.clone(), text: self.text.clone(), faults, is_first_round });
        Failure::Input(others)
    }
}

/// A fault of a job that no file describes: what stands for a key is its flag.
fn without_file(mut fault: Fault) -> Fault {
    let within = ["sections[0]", "filter"].iter().find_map(|key| fault.path.strip_prefix(key));
    if let Some(rest) = within {
        let key = rest.trim_start_matches('.').split(['.', '[']).next().unwrap_or_default();
        fault.path = if key.is_empty() { String::new() } else { format!("--{}", key.replace('_', "-")) };
    }
    fault
}

/// A flag's value, where it is given.
pub(super) fn given<T: From<U>, U>(flag: &'static str, value: Option<U>) -> Option<Given<T>> {
    value.map(|value| Given::flag(flag, value))
}

pub(super) fn scalar(flag: &'static str, text: &Option<String>) -> Option<Given<Scalar>> {
    given(flag, text.as_deref())
}

/// Keeps a value, or notes its fault.
pub(super) fn noted<T>(faults: &mut Vec<Fault>, read: Option<Result<T, Fault>>) -> Option<T> {
    match read? {
        Ok(value) => Some(value),
        Err(fault) => {
            faults.push(fault);
            None
        }
    }
}

/// Lays the flags for the job as a whole over it. They win over its sections too.
fn lay_over(job: &mut JobFile, args: &ShortlistArgs) -> Vec<Fault> {
    let mut faults = Vec::new();
    let PartsArgs { circuit, output, sign, resistors, capacitors, exclude_resistors, exclude_capacitors, impedance } =
        &args.parts;
    let GoalArgs {
        measure,
        band,
        floor,
        ignore_gain,
        max_part_numbers,
        wanted_error,
        error_limit,
        own_error,
        one_at_a_time,
        error_resolution,
        rows,
        alternatives,
        rank,
        time_limit,
    } = &args.goals;
    let DrawerArgs {
        stock,
        skip_bad_lines,
        boards,
        spares,
        buy,
        bar_class_2,
        own_set_per_board,
        pairs,
        pairs_at_most,
    } = &args.stock;
    let shelf = |flag, text: &Option<String>| text.as_deref().map(|text| ShelfFile::from_flag(flag, text));
    let range = |flag, text: &Option<String>| text.as_deref().map(|text| Given::range(flag, text));
    let over = JobFile {
        title: scalar("--title", &args.output.title),
        sections: None,
        filter: None,
        circuit: circuit.as_deref().map(|name| Given::flag("--circuit", named_circuit(name, args).as_str())),
        output: scalar("--output", output),
        sign: sign
            .as_deref()
            .map(|sign| Given::flag("--sign", if sign == "either" { Sign::Either } else { Sign::Kept })),
        resistors: noted(&mut faults, shelf("--resistors", resistors)),
        capacitors: noted(&mut faults, shelf("--capacitors", capacitors)),
        band: noted(&mut faults, range("--band", band)),
        floor: scalar("--floor", floor),
        ignore_gain: given("--ignore-gain", *ignore_gain),
        measure: noted(&mut faults, measure.as_deref().map(measure_of)),
        max_part_numbers: scalar("--max-part-numbers", max_part_numbers),
        wanted_error: scalar("--wanted-error", wanted_error),
        error_limit: scalar("--error-limit", error_limit),
        own_error: scalar("--own-error", own_error),
        one_at_a_time: given("--one-at-a-time", *one_at_a_time),
        error_resolution: scalar("--error-resolution", error_resolution),
        rows: scalar("--rows", rows),
        alternatives: scalar("--alternatives", alternatives),
        impedance: noted(&mut faults, range("--impedance", impedance)),
        time_limit: scalar("--time-limit", time_limit),
        stock: stock.as_deref().map(|path| Given::flag("--stock", path.to_string_lossy().as_ref())),
        skip_bad_lines: given("--skip-bad-lines", *skip_bad_lines),
        boards: scalar("--boards", boards),
        spares: scalar("--spares", spares),
        buy: scalar("--buy", buy),
        bar_class_2: given("--bar-class-2", *bar_class_2),
        pairs: (!pairs.is_empty()).then(|| Given::flag("--pairs", pairs_of(pairs, pairs_at_most))),
        rank: rank.as_deref().map(|rank| Given::flag("--rank", rank_of(rank))),
        own_set_per_board: given("--own-set-per-board", *own_set_per_board),
        mask: args.yields.mask.as_deref().map(|path| Given::flag("--mask", path.to_string_lossy().as_ref())),
    };
    for section in job.sections.iter_mut().flat_map(|sections| &mut sections.value) {
        clear(&mut section.circuit, &over.circuit);
        clear(&mut section.output, &over.output);
        clear(&mut section.sign, &over.sign);
        clear(&mut section.resistors, &over.resistors);
        clear(&mut section.capacitors, &over.capacitors);
        clear(&mut section.pairs, &over.pairs);
    }
    if let Some(filter) = &mut job.filter {
        clear(&mut filter.value.circuits, &over.circuit);
    }
    job.overlay(over);
    exclude(
        job,
        "--exclude-resistors",
        exclude_resistors,
        |job| &mut job.resistors,
        |section| &mut section.resistors,
    );
    exclude(
        job,
        "--exclude-capacitors",
        exclude_capacitors,
        |job| &mut job.capacitors,
        |section| &mut section.capacitors,
    );
    faults
}

/// The pairs that a flag allows.
fn pairs_of(kinds: &[String], at_most: &Option<String>) -> PairsFile {
    let names = |name: &str| kinds.iter().any(|kind| kind == name);
    let joints = |wanted: [(bool, Joint); 2]| {
        let joints: Vec<Joint> = wanted.iter().filter(|(wanted, _)| *wanted).map(|(_, joint)| *joint).collect();
        (!joints.is_empty()).then(|| Given::flag("--pairs", Joints(joints)))
    };
    let resistors = names("resistors");
    PairsFile {
        resistors: joints([(resistors, Joint::Series), (resistors, Joint::Parallel)]),
        capacitors: joints([(names("series-capacitors"), Joint::Series), (names("capacitors"), Joint::Parallel)]),
        slots: None,
        at_most: scalar("--pairs-at-most", at_most),
    }
}

fn rank_of(name: &str) -> RankFile {
    match name {
        "part-numbers" => RankFile::PartNumbers,
        "to-buy" => RankFile::ToBuy,
        "cost" => RankFile::Cost,
        "placed-parts" => RankFile::PlacedParts,
        "yield" => RankFile::Yield,
        "spread" => RankFile::Spread,
        _ => RankFile::Error,
    }
}

/// Takes away what a section says where a flag says something else.
fn clear<T, U>(own: &mut Option<Given<T>>, over: &Option<Given<U>>) {
    if over.is_some() {
        *own = None;
    }
}

/// The circuit that a flag names: a file is named from the working folder, while a job file names it from its own.
fn named_circuit(name: &str, args: &ShortlistArgs) -> String {
    let absolute = || Some(std::path::absolute(name).ok()?.to_str()?.to_string());
    let elsewhere = args.job.is_some() && is_file_name(name);
    elsewhere.then(absolute).flatten().unwrap_or_else(|| name.to_string())
}

/// Takes values off the shelves of the job and of its sections.
fn exclude(
    job: &mut JobFile,
    flag: &'static str,
    text: &Option<String>,
    of_job: impl Fn(&mut JobFile) -> &mut Option<Given<Shelves>>,
    of_section: impl Fn(&mut SectionFile) -> &mut Option<Given<Shelves>>,
) {
    let Some(text) = text else { return };
    let values: Vec<Scalar> = text.split(',').map(|value| Scalar::from(value.trim())).collect();
    let take_off = |shelves: &mut Given<Shelves>| {
        for shelf in &mut shelves.value.0 {
            let exclude = shelf.exclude.get_or_insert_with(|| Given { value: Scalars::default(), flag: None });
            // The flag is named where one of all these values cannot be read.
            exclude.flag = Some(flag);
            exclude.value.0.extend(values.iter().cloned());
        }
    };
    let usual = || Given { value: Shelves(vec![ShelfFile::default()]), flag: None };
    take_off(of_job(job).get_or_insert_with(usual));
    for section in job.sections.iter_mut().flat_map(|sections| &mut sections.value) {
        of_section(section).iter_mut().for_each(take_off);
    }
}

/// The measure that a flag names.
fn measure_of(text: &str) -> Result<Given<MeasureFile>, Fault> {
    const FLAG: &str = "--measure";
    let (name, weights) = text.split_once(':').unwrap_or((text, ""));
    let weighted = name == "weighted" && !weights.is_empty();
    let measure = match name {
        "decibel" if weights.is_empty() => MeasureFile::Decibel,
        "vector" if weights.is_empty() => MeasureFile::Vector,
        _ if weighted => {
            let mut found: [Option<Scalar>; 4] = [None, None, None, None];
            for pair in weights.split(',') {
                let place = pair.split_once('=').and_then(|(key, weight)| {
                    let index = ["f0", "q", "gain", "fz"].iter().position(|known| *known == key.trim())?;
                    Some((index, Scalar::from(weight.trim())))
                });
                let Some((index, weight)) = place else {
                    let message = format!("`{pair}` is no weight");
                    return Err(Fault::at(FLAG, message).help("write f0=, q=, gain= or fz= and a number"));
                };
                if found[index].replace(weight).is_some() {
                    let message = format!("`{}` is there twice", pair.split('=').next().unwrap_or_default());
                    return Err(Fault::at(FLAG, message).help("keep one of the two"));
                }
            }
            let [f0, q, gain, fz] = found;
            MeasureFile::Weighted { f0, q, gain, fz }
        }
        _ => {
            let message = format!("`{text}` is no measure");
            return Err(Fault::at(FLAG, message).help("write decibel, vector or weighted:f0=1,q=0.2,gain=1"));
        }
    };
    Ok(Given::flag(FLAG, measure))
}

/// The flags that describe a section and are given.
fn section_flags(args: &SectionArgs) -> Vec<&'static str> {
    let SectionArgs { shape, f0, w0, poles, q, gain, fz, wz, name, slot, equal, untie } = args;
    let given = [
        ("--shape", shape.is_some()),
        ("--f0", f0.is_some()),
        ("--w0", w0.is_some()),
        ("--poles", poles.is_some()),
        ("--q", q.is_some()),
        ("--gain", gain.is_some()),
        ("--fz", fz.is_some()),
        ("--wz", wz.is_some()),
        ("--name", name.is_some()),
        ("--slot", !slot.is_empty()),
        ("--equal", !equal.is_empty()),
        ("--untie", !untie.is_empty()),
    ];
    given.into_iter().filter(|(_, is_given)| *is_given).map(|(flag, _)| flag).collect()
}

/// The section that the flags describe.
fn one_section(args: &SectionArgs) -> Result<SectionFile, Vec<Fault>> {
    let SectionArgs { shape, f0, w0, poles, q, gain, fz, wz, name, slot, equal, untie } = args;
    let example = "for example --shape low-pass --f0 1k --q 0.7071; or name a job file";
    let mut faults = Vec::new();
    if section_flags(args).is_empty() {
        let message = "there is neither a job file nor a section";
        return Err(vec![Fault::at("", message).help(format!("describe a section, {example}"))]);
    }
    if shape.is_none() {
        faults.push(Fault::at("--shape", "the section has no shape").help(example));
    }
    if f0.is_none() && w0.is_none() && poles.is_none() {
        let help = "give --f0 in Hz, --w0 in rad/s, or two --poles in Hz";
        faults.push(Fault::at("--f0", "the section has no frequency").help(help));
    }
    let shape = shape.as_deref().and_then(|name| Shape::ALL.into_iter().find(|shape| shape_flag(*shape) == name));
    let poles = match poles.as_deref() {
        Some([first, second]) => Some(Given::flag("--poles", (first.as_str().into(), second.as_str().into()))),
        _ => None,
    };
    let section = SectionFile {
        name: scalar("--name", name),
        shape: given("--shape", shape),
        f0: scalar("--f0", f0),
        w0: scalar("--w0", w0),
        poles,
        q: scalar("--q", q),
        gain: scalar("--gain", gain),
        fz: scalar("--fz", fz),
        wz: scalar("--wz", wz),
        slots: slots(&mut faults, slot),
        equal: groups("--equal", &mut faults, equal),
        untie: match untie.as_slice() {
            [] => None,
            list if list.iter().any(|text| text == "all") => Some(Given::flag("--untie", Untie::All(true))),
            list => {
                groups("--untie", &mut faults, list).map(|given| Given::flag("--untie", Untie::Groups(given.value)))
            }
        },
        ..SectionFile::default()
    };
    if faults.is_empty() { Ok(section) } else { Err(faults) }
}

/// What single slots may hold, from `R1=10k` and the like.
fn slots(faults: &mut Vec<Fault>, texts: &[String]) -> Option<Given<Slots>> {
    const FLAG: &str = "--slot";
    let mut slots: Vec<(String, SlotFile)> = Vec::new();
    for text in texts {
        let Some((name, shelf)) = text.split_once('=').map(|(name, shelf)| (name.trim(), shelf)) else {
            let message = format!("`{text}` names no shelf");
            faults.push(Fault::at(FLAG, message).help("write R1=10k or C1=E6:1n..100n"));
            continue;
        };
        if slots.iter().any(|(known, _)| known == name) {
            faults.push(Fault::at(FLAG, format!("the slot `{name}` is there twice")).help("keep one of the two"));
        }
        let shelf = noted(faults, Some(ShelfFile::from_flag(FLAG, shelf)));
        slots.push((name.to_string(), SlotFile { shelf, ..SlotFile::default() }));
    }
    (!slots.is_empty()).then(|| Given::flag(FLAG, Slots(slots)))
}

/// Groups of slots, from `R1=R2` and the like.
fn groups(flag: &'static str, faults: &mut Vec<Fault>, texts: &[String]) -> Option<Given<Vec<Vec<Scalar>>>> {
    let mut groups = Vec::new();
    for text in texts {
        let group: Vec<&str> = text.split('=').map(str::trim).collect();
        if group.len() < 2 || group.iter().any(|name| name.is_empty()) {
            faults.push(Fault::at(flag, format!("`{text}` is no group of slots")).help("write R1=R2"));
        }
        groups.push(group.into_iter().map(Scalar::from).collect());
    }
    (!groups.is_empty()).then(|| Given::flag(flag, groups))
}
