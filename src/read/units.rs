//! Units as headings and schedules write them: enough to see that two of them differ.
//!
//! Nothing is converted here: where log and schedule differ, the schedule gives scale and offset. The symbols
//! of SI units and of units used beside them are those of ISO 80000-1:2022 and NIST SP 811 (2008), tables 2,
//! 3, 6 and 8; those of US customary units stand in its appendix B.8 (from memory). The other spellings are
//! common in exports.

/// Spellings of a unit; the first is how it is printed in messages. Units of one measure stand
/// together only for reading: every line is a unit of its own.
const UNITS: [&[&str]; 52] = [
    &["degC", "c", "celsius", "gradc"],
    &["degF", "f", "fahrenheit"],
    &["K", "kelvin"],
    &["bar"],
    &["bar(a)", "bara", "barabs"],
    &["bar(g)", "barg"],
    &["mbar", "mbara", "hpa"],
    &["Pa"],
    &["kPa"],
    &["kPa(a)", "kpaa"],
    &["kPa(g)", "kpag"],
    &["MPa", "mpaa"],
    &["psi", "lbf/in2"],
    &["psi(a)", "psia"],
    &["psi(g)", "psig"],
    &["inH2O", "inwc", "inwg", "\"h2o"],
    &["mmH2O", "mmwc", "mmwg"],
    &["mmHg", "torr"],
    &["kg/cm2"],
    &["m3/h", "m3/hr", "cbm/h", "cmh"],
    &["m3/min"],
    &["m3/s"],
    &["Nm3/h", "nm3/hr"],
    &["l/h", "l/hr", "lph"],
    &["l/min", "lpm", "l/m"],
    &["l/s"],
    &["gpm", "usgpm", "gal/min"],
    &["kg/h", "kg/hr"],
    &["kg/min"],
    &["kg/s"],
    &["t/h", "t/hr", "te/h", "tph"],
    &["lb/h", "lb/hr", "lbs/hr", "pph"],
    &["m", "meter", "metre"],
    &["cm"],
    &["mm"],
    &["ft"],
    &["in", "inch"],
    &["%", "percent", "pct", "%op", "%co"],
    &["ppm", "ppmw", "ppmv"],
    &["mA"],
    &["rpm", "1/min"],
    &["m3/d", "m3/day"],
    &["ft3/min", "cfm"],
    &["scfm"],
    &["bbl/d", "bpd", "bbl/day"],
    &["lb/min"],
    &["kg/m3"],
    &["g/l"],
    &["pH"],
    &["uS/cm", "µs/cm", "μs/cm"],
    &["mS/cm"],
    &["Hz"],
];

/// A unit with its spelling evened out: case, spaces, the degree sign, raised figures.
fn even(unit: &str) -> String {
    unit.trim()
        .chars()
        .filter(|letter| {
            !letter.is_whitespace() && !matches!(letter, '(' | ')' | '[' | ']' | '^' | '.')
        })
        .map(|letter| match letter {
            '³' => '3',
            '²' => '2',
            '₂' => '2',
            other => other,
        })
        .filter(|letter| !matches!(letter, '°' | 'º'))
        .collect::<String>()
        .to_lowercase()
        .replace("deg", "")
}

/// The unit as messages print it, where it is a known one.
pub fn known(unit: &str) -> Option<&'static str> {
    let evened = even(unit);
    UNITS
        .iter()
        .find(|spellings| even(spellings[0]) == evened || spellings[1..].contains(&evened.as_str()))
        .map(|spellings| spellings[0])
}

/// Whether both units are known and are not the same. A pressure unit that does not say whether it
/// is gauge or absolute agrees with either.
pub fn differ(one: &str, other: &str) -> bool {
    let loose = |one: &str, other: &str| {
        one.strip_prefix(other)
            .is_some_and(|rest| matches!(rest, "(g)" | "(a)"))
    };
    match (known(one), known(other)) {
        (Some(one), Some(other)) => one != other && !loose(one, other) && !loose(other, one),
        _ => false,
    }
}

/// Units of a count of time.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TimeUnit {
    /// ms
    Milliseconds,
    /// s
    Seconds,
    /// min
    Minutes,
    /// h
    Hours,
    /// d
    Days,
}

impl TimeUnit {
    /// Seconds in one.
    pub fn seconds(self) -> f64 {
        match self {
            TimeUnit::Milliseconds => 0.001,
            TimeUnit::Seconds => 1.0,
            TimeUnit::Minutes => 60.0,
            TimeUnit::Hours => 3600.0,
            TimeUnit::Days => 86_400.0,
        }
    }

    /// In words.
    pub fn description(self) -> &'static str {
        match self {
            TimeUnit::Milliseconds => "milliseconds",
            TimeUnit::Seconds => "seconds",
            TimeUnit::Minutes => "minutes",
            TimeUnit::Hours => "hours",
            TimeUnit::Days => "days",
        }
    }

    /// The unit that a word names.
    pub fn of(word: &str) -> Option<Self> {
        Some(
            match word.trim().trim_end_matches('.').to_lowercase().as_str() {
                "ms" | "msec" | "millisecond" | "milliseconds" => TimeUnit::Milliseconds,
                "s" | "sec" | "secs" | "second" | "seconds" | "sekunden" => TimeUnit::Seconds,
                "min" | "mins" | "minute" | "minutes" | "minuten" => TimeUnit::Minutes,
                "h" | "hr" | "hrs" | "hour" | "hours" | "stunden" => TimeUnit::Hours,
                "d" | "day" | "days" | "tage" => TimeUnit::Days,
                _ => return None,
            },
        )
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn spellings_meet_and_units_differ() {
        for (one, other) in [
            ("°C", "degC"),
            ("deg C", "C"),
            ("m³/h", "m3/hr"),
            ("bar(g)", "barg"),
            ("%", "percent"),
        ] {
            assert_eq!(known(one), known(other), "{one} {other}");
            assert!(known(one).is_some(), "{one}");
        }
        assert!(differ("degC", "degF"));
        assert!(differ("bar", "kPa"));
        assert!(differ("m3/h", "l/h"));
        assert!(differ("bara", "barg"));
        assert!(differ("psi", "bar"));
        assert!(differ("µS/cm", "mS/cm"));
        assert!(differ("scfm", "cfm"));
        assert!(!differ("bar", "bar(g)"));
        assert!(!differ("degC", "widgets"));
        assert_eq!(TimeUnit::of("sec."), Some(TimeUnit::Seconds));
        assert_eq!(TimeUnit::of("degC"), None);
    }

    #[test]
    fn no_spelling_means_two_units() {
        let mut seen = std::collections::BTreeSet::new();
        for spellings in UNITS {
            let mut evened: Vec<String> = spellings.iter().map(|unit| even(unit)).collect();
            evened.dedup();
            for unit in evened {
                assert!(seen.insert(unit.clone()), "{unit} stands twice");
            }
        }
    }
}
