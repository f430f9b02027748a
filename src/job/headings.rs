//! The headings of the loop schedule.

/// One column of the loop schedule.
#[derive(Debug, Clone, Copy)]
pub struct Heading {
    /// The heading.
    pub name: &'static str,
    /// Whether the column has to be there and each of its cells filled.
    pub required: bool,
    /// The words it takes, where it takes no others; the first that fits is the usual one.
    pub words: &'static [&'static str],
    /// What belongs in it.
    pub note: &'static str,
}

const fn required(name: &'static str, note: &'static str) -> Heading {
    Heading {
        name,
        required: true,
        words: &[],
        note,
    }
}

const fn optional(name: &'static str, note: &'static str) -> Heading {
    Heading {
        name,
        required: false,
        words: &[],
        note,
    }
}

impl Heading {
    const fn words(self, words: &'static [&'static str]) -> Heading {
        Heading { words, ..self }
    }
}

/// Yes or no.
pub const YES_NO: &[&str] = &["yes", "no"];

/// Every heading, in the order in which a new schedule has them.
pub const HEADINGS: &[Heading] = &[
    required("tag", "Tag of the loop, as on the drawings; each once."),
    required("service", "What the loop controls."),
    required("pv unit", "Engineering unit of the PV, of its range and of the log."),
    required("pv low", "Low end of the PV's range."),
    required("pv high", "High end of the PV's range."),
    optional("op low", "Low end of the OP's range; blank: 0."),
    optional("op high", "High end of the OP's range; blank: 100."),
    optional("op unit", "Unit of the OP; blank: %."),
    optional("controller", "Make and model."),
    required("action", "Which way the OP moves when the PV rises: direct: up, reverse: down.")
        .words(&["reverse", "direct"]),
    required("form", "Form of the PID equation: standard (ideal), series or parallel.")
        .words(&["standard", "series", "parallel", "ideal"]),
    required("p as", "How P is typed: gain (% OP per % PV), band (proportional band, %), gain per unit (% OP per PV unit).")
        .words(&["gain", "band", "gain per unit"]),
    required("i as", "How I is typed: integral time in s or min, repeats per s or min. With the parallel form 1/s or 1/min.")
        .words(&["s", "min", "1/s", "1/min"]),
    optional("d as", "How D is typed; blank: s.").words(&["s", "min"]),
    optional("d on", "What the derivative acts on; blank: pv.").words(&["pv", "error"]),
    optional("p on", "What the proportional term acts on; blank: error.").words(&["error", "pv"]),
    optional("d filter", "N of the derivative filter Td/N; blank: 10, 0: unfiltered."),
    required("scan s", "How often the controller executes, s."),
    optional("pv filter s", "Time constant of the filter on the PV, s; blank: 0."),
    optional("pv filter in log", "Whether the PV was logged after that filter; blank: yes.").words(YES_NO),
    optional("found p", "P as read from the controller before the work, in its own form and unit; needed for the record."),
    optional("found i", "I as read before the work; blank or 0: not used."),
    optional("found d", "D as read before the work; blank or 0: not used."),
    optional("left p", "P as entered; blank until it was entered."),
    optional("left i", "I as entered; blank or 0: not used."),
    optional("left d", "D as entered; blank or 0: not used."),
    optional("left on", "Date, with time of day where it matters, on which the settings were entered."),
    optional("entered by", "Who entered them."),
    optional("left action", "Action where it was changed; blank: as found.").words(&["reverse", "direct"]),
    optional("left pv filter s", "PV filter where it was changed, s; blank: as found."),
    optional("aim", "What the loop is for; blank: load. averaging is for integrating processes.")
        .words(&["load", "set point", "averaging"]),
    optional("derivative", "Whether the design may use derivative action; blank: no.").words(YES_NO),
    optional("target s", "Wanted closed-loop time constant, s; blank: the fastest that the limits allow."),
    optional("target reason", "Why a target faster than the soft limits is wanted, and who says so."),
    optional("allowed deviation", "Averaging: allowed deviation of the level, PV units."),
    optional("expected load", "Averaging: expected load change, % of OP."),
    optional("op move limit", "% of OP moved at once by a 1 % set-point step; blank: as in job.toml."),
    optional("inner loop", "Tag of the loop whose set point this one moves."),
    optional("safety", "Whether the loop takes part in a protective function.").words(YES_NO),
    optional("safety procedure", "The procedure that governs changing it."),
    optional("waiver", "Accepts an open item of the test, with the reason; printed."),
    optional("test log", "Step test, needed for the record: file below the job folder, file.xlsx#Sheet for one sheet, several with ;"),
    optional("test from", "First moment used of the test log."),
    optional("test to", "Last moment used of the test log."),
    optional("trial log", "Closed-loop log after the settings were entered."),
    optional("trial from", "First moment used of the trial log."),
    optional("trial to", "Last moment used of the trial log."),
    optional("time column", "Heading of the time column, or #3 for the third column; Date + Time for two. Blank: recognised."),
    optional("pv column", "Heading of the PV column, or its number. Blank: recognised."),
    optional("op column", "Heading of the OP column, or its number. Blank: recognised."),
    optional("sp column", "Heading of the SP column, or its number. Blank: recognised."),
    optional("mode column", "Heading of the mode column, or its number. Blank: recognised."),
    optional("quality column", "Heading of the quality column, or its number. Blank: recognised."),
    optional("tag column", "Heading of the tag column of a long table, or its number. Blank: recognised."),
    optional("pv scale", "Schedule unit = log unit × scale + offset; blank: 1."),
    optional("pv offset", "Schedule unit = log unit × scale + offset; blank: 0."),
    optional("revision", "This loop's own revision, where it differs from the job's."),
    optional("date", "Date of that revision."),
    optional("reason", "Reason for that revision."),
    optional("tested by", "Who tested the loop."),
    optional("tested on", "Date of the test."),
    optional("witnessed by", "Who witnessed the test."),
    optional("conditions", "Plant conditions during the test."),
    optional("transmitter", "Transmitter, printed where given."),
    optional("valve", "Valve, printed where given."),
    optional("valve fail", "Where the valve goes without air or power."),
    optional("normal mode", "Mode in which the loop is normally left."),
    optional("drawing", "Drawing number."),
    optional("change number", "Number of the change."),
    optional("remarks", "Anything else, printed where given."),
];

/// A heading for comparison: case, spaces and underscores do not count.
pub fn even(text: &str) -> String {
    text.chars()
        .filter(|letter| !letter.is_whitespace() && *letter != '_')
        .flat_map(char::to_lowercase)
        .collect()
}

/// The heading that a text means.
pub fn of(text: &str) -> Option<&'static Heading> {
    let evened = even(text);
    HEADINGS.iter().find(|heading| even(heading.name) == evened)
}
