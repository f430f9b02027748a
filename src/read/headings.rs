//! Headings of a log: what each says of its column.

use super::units::{self, TimeUnit};

/// What a column is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, serde::Serialize)]
#[serde(rename_all = "kebab-case")]
pub enum Role {
    /// Date and time of day, or elapsed time.
    Time,
    /// Process variable.
    Pv,
    /// Controller output.
    Op,
    /// Set point.
    Sp,
    /// Controller mode.
    Mode,
    /// Quality of the PV.
    Quality,
    /// Tag of the value beside it (long tables).
    Tag,
    /// Value of the tag beside it (long tables).
    Value,
}

impl Role {
    /// As messages name it.
    pub fn name(self) -> &'static str {
        match self {
            Role::Time => "time",
            Role::Pv => "PV",
            Role::Op => "OP",
            Role::Sp => "SP",
            Role::Mode => "mode",
            Role::Quality => "quality",
            Role::Tag => "tag",
            Role::Value => "value",
        }
    }

    /// The schedule's heading that names the column of this role.
    pub fn schedule_heading(self) -> &'static str {
        match self {
            Role::Time => "time column",
            Role::Pv | Role::Value => "pv column",
            Role::Op => "op column",
            Role::Sp => "sp column",
            Role::Mode => "mode column",
            Role::Quality => "quality column",
            Role::Tag => "tag column",
        }
    }
}

/// How surely a heading gives its column a role; the surest wins.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub enum Sureness {
    /// The usual word and nothing else.
    Exact,
    /// The tag alone, which in a trend is its PV.
    BareTag,
    /// The usual word among others.
    Among,
}

/// Whose column it is.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Owner {
    /// The loop asked for.
    This,
    /// Another tag.
    Other(String),
    /// The heading bears no tag.
    Nobody,
}

/// What a heading says.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Meaning {
    /// The role; `None` where no usual word stands in it.
    pub role: Option<(Role, Sureness)>,
    /// Whose column.
    pub owner: Owner,
    /// Unit in brackets or at the end.
    pub unit: Option<String>,
}

/// Usual words in one piece, letters and figures only.
fn role_of(word: &str) -> Option<Role> {
    Some(match word {
        "TIME" | "TIMESTAMP" | "DATETIME" | "DATEANDTIME" | "DATE" | "LOCALTIME" | "TIMELOCAL"
        | "UTC" | "UTCTIME" | "TIMEUTC" | "ELAPSED" | "ELAPSEDTIME" | "SECONDS" | "MINUTES"
        | "ZEIT" | "ZEITSTEMPEL" | "DATUM" | "UHRZEIT" | "DATUMUHRZEIT" | "DATUMZEIT" => Role::Time,
        "PV" | "PROCESSVALUE" | "PROCESSVARIABLE" | "MEASUREDVALUE" | "MEASUREDVARIABLE"
        | "MEASUREMENT" | "MEAS" | "ISTWERT" => Role::Pv,
        "OP"
        | "CO"
        | "OUT"
        | "MV"
        | "OUTPUT"
        | "CONTROLLEROUTPUT"
        | "CONTROLOUTPUT"
        | "MANIPULATEDVARIABLE"
        | "MANIPULATEDVALUE"
        | "STELLGRÖSSE"
        | "STELLGRÖẞE"
        | "STELLWERT" => Role::Op,
        "SP" | "SETPOINT" | "SETVALUE" | "SOLLWERT" => Role::Sp,
        "MODE" | "MODEACTUAL" | "ACTUALMODE" | "AUTOMAN" | "MANAUTO" | "AM" | "CONTROLLERMODE"
        | "BETRIEBSART" => Role::Mode,
        "QUALITY" | "QUAL" | "STATUS" | "GOOD" | "VALID" | "QUALITÄT" => Role::Quality,
        "TAG" | "TAGNAME" | "NAME" | "POINT" | "POINTNAME" | "SIGNAL" | "ITEM" => Role::Tag,
        "VALUE" | "VAL" | "WERT" => Role::Value,
        _ => return None,
    })
}

/// Words that say how a value was stored, not what it is.
fn is_silent(word: &str) -> bool {
    matches!(
        word,
        "VALUE"
            | "VAL"
            | "AVG"
            | "AVERAGE"
            | "MEAN"
            | "SNAPSHOT"
            | "ACTUAL"
            | "OF"
            | "THE"
            | "WERT"
    )
}

/// Splits brackets off the end: the heading proper and what stood in the last of them.
fn split_unit(text: &str) -> (&str, Option<&str>) {
    let trimmed = text.trim_end();
    for (open, close) in [('(', ')'), ('[', ']'), ('{', '}')] {
        if trimmed.ends_with(close) {
            // "bar(g)" in square brackets, or "(m3/h)": the bracket that closes last was opened
            // where the count of open ones falls to none.
            let mut depth = 0_i32;
            for (at, letter) in trimmed.char_indices().rev() {
                if letter == close {
                    depth += 1;
                } else if letter == open {
                    depth -= 1;
                    if depth == 0 {
                        let unit = trimmed[at + 1..trimmed.len() - 1].trim();
                        return (trimmed[..at].trim_end(), (!unit.is_empty()).then_some(unit));
                    }
                }
            }
        }
    }
    // "TIC-204.PV degC", "Time s", "t_s"
    if let Some((head, last)) = trimmed.rsplit_once([' ', ',', '_'])
        && !head.trim().is_empty()
        && role_of(&squash(last)).is_none()
    {
        let is_time_unit = TimeUnit::of(last).is_some();
        let is_plain_unit =
            units::known(last).is_some() && (last.chars().count() > 1 || last == "%");
        let head = head.trim_end_matches([' ', ',', '_']);
        if is_plain_unit || (is_time_unit && names_time(head)) {
            return (head, Some(last));
        }
    }
    (trimmed, None)
}

fn names_time(head: &str) -> bool {
    let squashed = squash(head);
    squashed == "T" || role_of(&squashed) == Some(Role::Time)
}

/// Letters and figures alone, in capitals.
pub fn squash(text: &str) -> String {
    text.chars()
        .filter(|letter| letter.is_alphanumeric())
        .flat_map(char::to_uppercase)
        .collect()
}

/// Words of a heading in capitals.
fn words(text: &str) -> Vec<String> {
    text.split(|letter: char| !letter.is_alphanumeric())
        .filter(|word| !word.is_empty())
        .map(|word| word.to_uppercase())
        .collect()
}

/// Finds `tag` in a heading, whatever separates its parts there: what stands before and after it.
fn split_at_tag<'a>(text: &'a str, tag: &str) -> Option<(&'a str, &'a str)> {
    let wanted = squash(tag);
    // Most headings of a wide log are those of other loops, told in one look.
    if wanted.is_empty() || (wanted.is_ascii() && !squash(text).contains(&wanted)) {
        return None;
    }
    let wanted: Vec<char> = wanted.chars().collect();
    let letters: Vec<(usize, char)> = text.char_indices().collect();
    for start in 0..letters.len() {
        if start > 0 && letters[start - 1].1.is_alphanumeric() {
            continue;
        }
        let mut found = 0;
        let mut at = start;
        while at < letters.len() && found < wanted.len() {
            let letter = letters[at].1;
            if letter.to_uppercase().next() == Some(wanted[found]) {
                found += 1;
            } else if found == 0 || !(matches!(letter, '-' | '_' | ' ') || tag.contains(letter)) {
                break;
            }
            at += 1;
        }
        if found < wanted.len() {
            continue;
        }
        let end = letters.get(at).map_or(text.len(), |(byte, _)| *byte);
        let (before, after) = (&text[..letters[start].0], &text[end..]);
        // "TIC204PV" runs on into a usual word; "TIC2041" and "TIC204A" are other tags.
        let run: String = after.chars().take_while(|l| l.is_alphanumeric()).collect();
        if run.is_empty() || role_of(&run.to_uppercase()).is_some() {
            return Some((before, after));
        }
    }
    None
}

/// A tag of the usual kind (letters, figures, perhaps a letter) in a heading, and what surrounds it.
fn any_tag(text: &str) -> Option<(String, &str, &str)> {
    let bytes = text.as_bytes();
    let mut start = 0;
    while start < bytes.len() {
        if !bytes[start].is_ascii_alphabetic()
            || (start > 0 && bytes[start - 1].is_ascii_alphanumeric())
        {
            start += 1;
            continue;
        }
        let run =
            |from: usize, is: fn(&u8) -> bool| bytes[from..].iter().take_while(|b| is(b)).count();
        let letters = run(start, u8::is_ascii_alphabetic);
        let mut at = start + letters;
        if bytes
            .get(at)
            .is_some_and(|byte| matches!(byte, b'-' | b'_' | b' '))
        {
            at += 1;
        }
        let figures = run(at, u8::is_ascii_digit);
        let end_of_figures = at + figures;
        let suffix = run(end_of_figures, u8::is_ascii_alphabetic);
        // A lone figure makes a tag ("FIC-3") only in capitals and set off: "Tank 1" is none.
        let one_figure = figures == 1
            && at > start + letters
            && bytes[at - 1] != b' '
            && bytes[start..start + letters]
                .iter()
                .all(u8::is_ascii_uppercase)
            && role_of(&text[start..start + letters]).is_none();
        if (2..=5).contains(&letters) && ((2..=6).contains(&figures) || one_figure) {
            let suffix_text = text[end_of_figures..end_of_figures + suffix].to_uppercase();
            let end = if role_of(&suffix_text).is_some() || suffix > 2 {
                end_of_figures
            } else {
                end_of_figures + suffix
            };
            return Some((
                text[start..end].to_uppercase(),
                &text[..start],
                &text[end..],
            ));
        }
        start += letters.max(1);
    }
    None
}

/// What a heading (or, in a long table, a cell of the tag column) says, for the loop `tag`.
pub fn meaning(text: &str, tag: Option<&str>) -> Meaning {
    let (proper, unit) = split_unit(text);
    let mut unit = unit.map(str::to_owned);
    let this = tag.and_then(|tag| split_at_tag(proper, tag));
    let (owner, before, after) = match this {
        Some((before, after)) => (Owner::This, before, after),
        None => match any_tag(proper) {
            Some((other, before, after)) => (Owner::Other(other), before, after),
            None => (Owner::Nobody, "", proper),
        },
    };
    let role = if owner == Owner::Nobody {
        role_in(before, after)
    } else if squash(after).is_empty() && role_in("", before).is_none() {
        Some((Role::Pv, Sureness::BareTag))
    } else {
        match role_in(before, after) {
            // "TIC-204 value"
            Some((Role::Value, _)) => Some((Role::Pv, Sureness::BareTag)),
            role => role,
        }
    };
    // "Minutes" and "Elapsed seconds" carry their unit in the word itself.
    if unit.is_none() && matches!(role, Some((Role::Time, _))) {
        unit = words(after)
            .into_iter()
            .find(|word| TimeUnit::of(word).is_some())
            .map(|word| word.to_lowercase());
    }
    Meaning { role, owner, unit }
}

/// The role that words around a tag give. Words before the tag are often the path to it.
fn role_in(before: &str, after: &str) -> Option<(Role, Sureness)> {
    let trailing = words(after);
    let leading = words(before);
    if let Some(role) = role_of(&trailing.concat()).filter(|_| leading.is_empty()) {
        return Some((role, Sureness::Exact));
    }
    let mut roles: Vec<Role> = Vec::new();
    let mut others = false;
    for (word, follows) in leading
        .iter()
        .map(|word| (word, false))
        .chain(trailing.iter().map(|word| (word, true)))
    {
        match role_of(word) {
            Some(Role::Value) => {}
            Some(role) if !roles.contains(&role) => roles.push(role),
            Some(_) => {}
            None if is_silent(word) => {}
            None => others |= follows,
        }
    }
    let sureness = if others {
        Sureness::Among
    } else {
        Sureness::Exact
    };
    // The time of a signal that has a time column of its own.
    if roles.contains(&Role::Time) {
        return Some((Role::Time, sureness));
    }
    // "SET POINT" and the like in several words.
    let together = trailing
        .iter()
        .filter(|word| !is_silent(word))
        .map(String::as_str)
        .collect::<String>();
    if let Some(role) = role_of(&together) {
        return Some((role, Sureness::Exact));
    }
    match roles.as_slice() {
        [] => (trailing == ["T"] && leading.is_empty()).then_some((Role::Time, Sureness::Among)),
        [role] => Some((*role, sureness)),
        // The quality of the PV; that of another signal is no business of the PV's.
        [Role::Pv, Role::Quality] | [Role::Quality, Role::Pv] => Some((Role::Quality, sureness)),
        _ => None,
    }
}

/// The name before the usual word at the end of a heading ("EXAMPLE-1" of "U200/EXAMPLE-1.PV"), for tags
/// that are not of the usual kind; `None` where no figure stands in it.
pub fn name_before_role(text: &str) -> Option<(&str, Role)> {
    let is_apart = |letter: char| !letter.is_alphanumeric() && letter != '-';
    let (proper, _) = split_unit(text);
    let mut rest = proper.trim_end();
    loop {
        let at = rest.rfind(is_apart)?;
        let (before, word) = rest.split_at(at);
        let word = word.trim_start_matches(is_apart).to_uppercase();
        rest = before.trim_end_matches(is_apart);
        if let Some(role) = role_of(&word).filter(|role| *role != Role::Value) {
            let name = rest.rsplit(['/', '\\', '.', ':', '!']).next()?.trim();
            let has_figure = name.bytes().any(|byte| byte.is_ascii_digit());
            return (has_figure && !name.contains(char::is_whitespace)).then_some((name, role));
        }
        if !is_silent(&word) {
            return None;
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn role(text: &str, tag: &str) -> Option<(Role, Sureness)> {
        let meaning = meaning(text, Some(tag));
        (!matches!(meaning.owner, Owner::Other(_)))
            .then_some(meaning.role)
            .flatten()
    }

    #[test]
    fn usual_headings_get_their_roles() {
        use Sureness::{Among, BareTag, Exact};
        for (text, expected) in [
            ("PV", Some((Role::Pv, Exact))),
            ("TIC-204.PV", Some((Role::Pv, Exact))),
            ("TIC-204/OP", Some((Role::Op, Exact))),
            ("TIC204 PV (degC)", Some((Role::Pv, Exact))),
            ("TIC_204_SP", Some((Role::Sp, Exact))),
            ("TIC204PV", Some((Role::Pv, Exact))),
            ("U200/TIC-204.PV.Value", Some((Role::Pv, Exact))),
            ("TIC-204", Some((Role::Pv, BareTag))),
            ("TIC-204 [degC]", Some((Role::Pv, BareTag))),
            ("TIC-204 Value", Some((Role::Pv, BareTag))),
            ("TIC-204.PV raw", Some((Role::Pv, Among))),
            ("TIC-204.PV.Quality", Some((Role::Quality, Exact))),
            ("Quality TIC-204", Some((Role::Quality, Exact))),
            ("TIC-204.OP quality", None),
            ("TIC-204 Set Point", Some((Role::Sp, Exact))),
            ("Process value", Some((Role::Pv, Exact))),
            ("Controller output (%)", Some((Role::Op, Exact))),
            ("Mode", Some((Role::Mode, Exact))),
            ("A/M", Some((Role::Mode, Exact))),
            ("Timestamp", Some((Role::Time, Exact))),
            ("Date/Time", Some((Role::Time, Exact))),
            ("Time (s)", Some((Role::Time, Exact))),
            ("TIC-204.PV Time", Some((Role::Time, Exact))),
            ("TIC-204.OP Timestamp", Some((Role::Time, Exact))),
            ("Timestamp TIC-204.OP", Some((Role::Time, Exact))),
            ("TIC-2041.PV", None),
            ("TIC-204A.PV", None),
            ("XTIC-204.PV", None),
            ("FIC-203.PV", None),
            ("Remarks", None),
        ] {
            assert_eq!(role(text, "TIC-204"), expected, "{text}");
        }
    }

    #[test]
    fn a_name_of_any_kind_stands_before_the_usual_word() {
        for (text, expected) in [
            ("EXAMPLE-1.PV", Some(("EXAMPLE-1", Role::Pv))),
            ("U200/EXAMPLE-1/OP [%]", Some(("EXAMPLE-1", Role::Op))),
            ("Reactor2.SP.Value", Some(("Reactor2", Role::Sp))),
            ("LOOP_7_PV", Some(("LOOP_7", Role::Pv))),
            ("Process value", None),
            ("Tank 1 PV", None),
            ("PV", None),
            ("CH1", None),
        ] {
            assert_eq!(name_before_role(text), expected, "{text}");
        }
    }

    #[test]
    fn units_come_off() {
        let unit = |text| meaning(text, Some("PIC-206")).unit;
        assert_eq!(unit("PIC-206.PV [bar(g)]").as_deref(), Some("bar(g)"));
        assert_eq!(unit("PV (°C)").as_deref(), Some("°C"));
        assert_eq!(unit("PV degC").as_deref(), Some("degC"));
        assert_eq!(unit("OP %").as_deref(), Some("%"));
        assert_eq!(unit("Time s").as_deref(), Some("s"));
        assert_eq!(unit("t_s").as_deref(), Some("s"));
        assert_eq!(unit("Elapsed minutes").as_deref(), Some("minutes"));
        assert_eq!(unit("PIC-206.PV"), None);
    }

    #[test]
    fn other_tags_are_seen() {
        assert_eq!(
            meaning("Plant.FIC_203.OP", Some("TIC-204")).owner,
            Owner::Other("FIC_203".into())
        );
        assert_eq!(
            meaning("FIC-3.PV (kg/h)", Some("TIC-1")).owner,
            Owner::Other("FIC-3".into())
        );
        for nobodys in ["PV", "PV_1", "SP 2", "Tank-1 level", "CH1"] {
            let owner = meaning(nobodys, Some("TIC-204")).owner;
            assert_eq!(owner, Owner::Nobody, "{nobodys}");
        }
        assert_eq!(
            meaning("LIC204PV", None).owner,
            Owner::Other("LIC204".into())
        );
    }
}
