//! A new job folder to fill in.

use super::headings::{HEADINGS, Heading};
use super::manifest::{self, Manifest};
use crate::notice::{Place, Problem};
use rust_xlsxwriter::{
    Color, DataValidation, DocProperties, ExcelDateTime, Format, Note, Workbook, Worksheet,
    XlsxError,
};
use std::fmt::Write;
use std::path::Path;

const JOB: &str = include_str!("../../templates/job/job.toml");
const README: &str = include_str!("../../templates/job/README.txt");

/// Rows of the schedule that have drop-downs.
const LAST_ROW: u32 = 500;

/// The example row: an invented loop, marked as such in every text of it.
const EXAMPLE: [(&str, &str); 22] = [
    ("tag", "EXAMPLE-1"),
    ("service", "Example: delete this row"),
    ("pv unit", "degC"),
    ("pv low", "0"),
    ("pv high", "100"),
    ("action", "reverse"),
    ("form", "standard"),
    ("p as", "gain"),
    ("i as", "s"),
    ("d as", "s"),
    ("scan s", "1"),
    ("found p", "0.5"),
    ("found i", "60"),
    ("aim", "load"),
    ("derivative", "no"),
    ("safety", "no"),
    ("test log", "logs/example-1.csv"),
    ("op low", "0"),
    ("op high", "100"),
    ("op unit", "%"),
    ("controller", "Example"),
    (
        "remarks",
        "Made up: the log was computed, no plant was tested",
    ),
];

/// Lays out a new job in `folder`, which is made where it is not there. Gives the names of the files
/// written, with forward slashes.
///
/// # Errors
/// Where the folder is a file, is not empty, or cannot be written to.
pub fn new_job(folder: &Path) -> Result<Vec<String>, Problem> {
    let unwritable = |error: std::io::Error| {
        Problem::general(format!(
            "{} cannot be written to: {}",
            folder.display(),
            error.kind()
        ))
    };
    if folder.exists() {
        let mut entries = std::fs::read_dir(folder).map_err(unwritable)?;
        if entries.next().is_some() {
            return Err(Problem::general(format!(
                "{} is not empty; a new job begins in an empty folder",
                folder.display()
            ))
            .hint("give the name of a folder that does not exist yet"));
        }
    }
    std::fs::create_dir_all(folder.join("logs")).map_err(unwritable)?;
    let workbook = schedule_workbook().map_err(|error| {
        Problem::error(
            Place::file("loops.xlsx"),
            format!("the workbook cannot be made: {error}"),
        )
    })?;
    let files: [(&str, Vec<u8>); 4] = [
        ("job.toml", JOB.into()),
        ("loops.xlsx", workbook),
        ("logs/example-1.csv", example_log().into_bytes()),
        ("README.txt", README.into()),
    ];
    let mut written = Vec::new();
    for (name, bytes) in files {
        std::fs::write(folder.join(name), bytes).map_err(unwritable)?;
        written.push(name.to_owned());
    }
    Ok(written)
}

/// What of `job.toml` still says what a new job says, and would be printed on every record.
pub(super) fn left_as_laid_out(manifest: &Manifest) -> Option<Problem> {
    let laid_out = Manifest::read(JOB).expect("the job file of a new job can be read");
    let procedure = |manifest: &Manifest| manifest.procedures.first().cloned();
    let same: Vec<&str> = [
        ("plant", manifest.plant == laid_out.plant),
        ("owner", manifest.owner == laid_out.owner),
        ("area", manifest.area == laid_out.area),
        ("date", manifest.date == laid_out.date),
        ("procedure", procedure(manifest) == procedure(&laid_out)),
    ]
    .into_iter()
    .filter_map(|(key, is_same)| is_same.then_some(key))
    .collect();
    (!same.is_empty()).then(|| {
        Problem::warning(
            Place::file(manifest::FILE),
            format!("as in a new job, to be filled in: {}", same.join(", ")),
        )
    })
}

/// The loop schedule with headings, notes, drop-downs and the example row.
fn schedule_workbook() -> Result<Vec<u8>, XlsxError> {
    let mut book = Workbook::new();
    // A fixed date: the same program makes the same bytes.
    book.set_properties(
        &DocProperties::new()
            .set_title("Loop schedule")
            .set_creation_datetime(&ExcelDateTime::from_ymd(2026, 1, 1)?),
    );
    let sheet = book.add_worksheet();
    sheet.set_name("Loops")?;
    let needed = Format::new()
        .set_bold()
        .set_font_color(Color::White)
        .set_background_color(Color::RGB(0x002F_4858))
        .set_text_wrap();
    let other = Format::new()
        .set_bold()
        .set_background_color(Color::RGB(0x00E3_E8EC))
        .set_text_wrap();
    let date = Format::new().set_num_format("yyyy-mm-dd");
    for (column, heading) in HEADINGS.iter().enumerate() {
        let column = column as u16;
        let format = if heading.required { &needed } else { &other };
        sheet.write_string_with_format(0, column, heading.name, format)?;
        sheet.insert_note(0, column, &note(heading))?;
        sheet.set_column_width(column, width(heading))?;
        if !heading.words.is_empty() {
            let list = DataValidation::new()
                .allow_list_strings(heading.words)?
                .set_error_title("Not one of the words")?
                .set_error_message(format!("One of: {}", heading.words.join(", ")))?;
            sheet.add_data_validation(1, column, LAST_ROW, column, &list)?;
        }
        if matches!(heading.name, "left on" | "date" | "tested on") {
            sheet.set_column_format(column, &date)?;
        }
        write_example(sheet, column, heading)?;
    }
    sheet.set_freeze_panes(1, 1)?;
    book.save_to_buffer()
}

fn note(heading: &Heading) -> Note {
    let kind = if heading.required { "Required. " } else { "" };
    Note::new(format!("{kind}{}", heading.note))
        .add_author_prefix(false)
        .set_width(260)
        .set_height(96)
}

fn width(heading: &Heading) -> f64 {
    match heading.name {
        "service" | "conditions" | "remarks" | "waiver" => 32.0,
        "test log" | "trial log" | "controller" | "transmitter" | "valve" => 22.0,
        name => 9.0_f64.max(name.len() as f64 + 1.0).min(16.0),
    }
}

fn write_example(sheet: &mut Worksheet, column: u16, heading: &Heading) -> Result<(), XlsxError> {
    let Some((_, value)) = EXAMPLE.iter().find(|(name, _)| *name == heading.name) else {
        return Ok(());
    };
    match value.parse::<f64>() {
        Ok(number) => sheet.write_number(1, column, number)?,
        Err(_) => sheet.write_string(1, column, *value)?,
    };
    Ok(())
}

/// The example's log: a first-order process (gain 1.2 %/%, time constant 60 s, dead time 10 s) with
/// noise, stepped both ways, one row a second.
fn example_log() -> String {
    const GAIN: f64 = 1.2;
    const TIME_CONSTANT_S: f64 = 60.0;
    const DEAD_TIME_S: usize = 10;
    const HOLD_S: usize = 400;
    const OP: [f64; 5] = [40.0, 45.0, 40.0, 35.0, 40.0];
    let mut text = String::from("Time,EXAMPLE-1.PV (degC),EXAMPLE-1.OP (%),EXAMPLE-1.MODE\n");
    let decay = libm::exp(-1.0 / TIME_CONSTANT_S);
    let op_at = |second: usize| OP[(second / HOLD_S).min(OP.len() - 1)];
    let mut pv = 55.0;
    let mut random = Random(20_260_101);
    for second in 0..HOLD_S * OP.len() {
        let moved = op_at(second.saturating_sub(DEAD_TIME_S + 1)) - OP[0];
        pv = 55.0 + GAIN * moved + (pv - 55.0 - GAIN * moved) * decay;
        let noise = 0.05 * random.normal();
        let (minutes, seconds) = (second / 60 % 60, second % 60);
        let hours = 9 + second / 3600;
        writeln!(
            text,
            "2026-01-01 {hours:02}:{minutes:02}:{seconds:02},{:.2},{:.1},MAN",
            pv + noise,
            op_at(second)
        )
        .expect("a string takes any text");
    }
    text
}

/// A small generator with a fixed seed (64-bit linear congruence of Knuth, MMIX constants).
struct Random(u64);

impl Random {
    /// Evenly distributed between 0 and 1.
    fn even(&mut self) -> f64 {
        self.0 = self
            .0
            .wrapping_mul(6_364_136_223_846_793_005)
            .wrapping_add(1_442_695_040_888_963_407);
        (self.0 >> 11) as f64 / (1_u64 << 53) as f64
    }

    /// Near enough to a normal deviate: the sum of twelve even ones less six.
    fn normal(&mut self) -> f64 {
        (0..12).map(|_| self.even()).sum::<f64>() - 6.0
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::job::Job;
    use crate::read::{FileCache, read_log};

    #[test]
    fn a_new_job_can_be_read_at_once() {
        let folder = tempfile::tempdir().expect("a folder");
        let root = folder.path().join("job");
        let written = new_job(&root).expect("a new job");
        assert_eq!(
            written,
            ["job.toml", "loops.xlsx", "logs/example-1.csv", "README.txt"]
        );
        let (job, warnings) = Job::read(&root).expect("a job");
        let warnings: Vec<String> = warnings.iter().map(ToString::to_string).collect();
        assert_eq!(
            warnings,
            ["job.toml: as in a new job, to be filled in: plant, owner, area, date, procedure"]
        );
        let row = job.loops[0].as_ref().expect("the example row");
        assert_eq!(row.tag, "EXAMPLE-1");
        assert_eq!(row.missing_for_record(), []);
        let request = job.test_request(row).expect("a test log");
        let log = read_log(&request, &FileCache::new()).expect("readable");
        assert_eq!(log.samples.t_s.len(), 2000);
        assert_eq!(log.bad_samples(), 0);
        assert!(log.samples.manual.iter().all(|manual| *manual));
    }

    #[test]
    fn the_same_bytes_each_time() {
        let first = schedule_workbook().expect("a workbook");
        let second = schedule_workbook().expect("a workbook");
        assert_eq!(first, second);
        assert_eq!(example_log(), example_log());
    }

    #[test]
    fn a_folder_in_use_is_refused() {
        let folder = tempfile::tempdir().expect("a folder");
        std::fs::write(folder.path().join("a.txt"), "mine").expect("written");
        let problem = new_job(folder.path()).expect_err("not empty");
        assert!(problem.to_string().contains("is not empty"));
        assert_eq!(
            std::fs::read_dir(folder.path()).expect("readable").count(),
            1
        );
    }

    #[test]
    fn every_example_value_has_its_heading() {
        for (name, _) in EXAMPLE {
            assert!(
                HEADINGS.iter().any(|heading| heading.name == name),
                "{name}"
            );
        }
    }
}
