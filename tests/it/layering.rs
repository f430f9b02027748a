//! The order of the house: who may import what, who alone touches the disk or a library, how long
//! a file may be, what lies at the top of the tree.
//!
//! Held by reading the sources. Test modules are left out: a test may reach anywhere.

use crate::support::{files_below, names_in, root};
use std::fs;

const GROUND: &[&str] = &[
    "quantity", "notice", "display", "trace", "model", "settings",
];
const STAGES: &[&str] = &["read", "steps", "identify", "predict", "design"];

/// Every module with the modules it may import, beside its own parts. In the order of the house:
/// a module may import only from those above it. The stages may import the earlier ones.
const MAY_IMPORT: &[(&str, &[&[&str]])] = &[
    // Ground: words that everything shares.
    ("quantity", &[]),
    ("notice", &[]),
    ("display", &[&["quantity"]]),
    ("trace", &[&["quantity"]]),
    ("model", &[&["quantity"]]),
    ("settings", &[&["quantity"]]),
    // Stages: each a pure function from earlier types to its own.
    ("read", &[GROUND]),
    ("steps", &[GROUND]),
    ("identify", &[GROUND, &["steps"]]),
    ("predict", &[GROUND, &["steps", "identify"]]),
    ("design", &[GROUND, &["steps", "identify", "predict"]]),
    // What they came to, and what is made of it.
    ("record", &[GROUND, STAGES]),
    ("plan", &[GROUND, STAGES, &["record"]]),
    ("figures", &[GROUND, STAGES, &["record"]]),
    (
        "document",
        &[GROUND, STAGES, &["record", "plan", "figures"]],
    ),
    ("archive", &[GROUND, STAGES, &["record", "plan"]]),
    ("register", &[GROUND, STAGES, &["record"]]),
    // Assembly.
    ("report", &[GROUND, &["record", "plan"]]),
    ("job", &[GROUND, STAGES, &["record", "archive"]]),
    ("assemble", &[GROUND, STAGES, &["record"]]),
    (
        "pipeline",
        &[
            GROUND,
            STAGES,
            &[
                "record", "figures", "document", "archive", "job", "assemble",
            ],
        ],
    ),
    ("inspect", &[GROUND, &["read", "steps"], &["report", "job"]]),
    (
        "run",
        &[
            GROUND,
            STAGES,
            &[
                "record", "document", "archive", "register", "report", "job", "assemble",
                "pipeline",
            ],
        ],
    ),
    (
        "planning",
        &[
            GROUND,
            &[
                "plan", "document", "archive", "report", "job", "assemble", "pipeline", "run",
            ],
        ],
    ),
    // What a person typed is none of the pipeline's business.
    ("cli", &[]),
    // `lib` and `main` put everything together and may import all of it.
];

/// These draw, print and store what the record holds and never compute: of a stage they may name
/// types alone, because the record's blocks are such types.
const TYPES_ALONE: &[&str] = &["figures", "document", "archive", "register"];

/// What stands in code, and the files (by the beginning of their path below `src`) that alone may
/// say so.
const RESERVED: &[(&[&str], &[&str])] = &[
    // The disk. `lib` hands paths through and never opens one.
    (
        &[
            "std::fs",
            "fs::",
            "File::open",
            "File::create",
            "tempfile::",
            ".exists()",
            ".is_dir()",
        ],
        &["read/", "job/", "archive/", "main.rs"],
    ),
    // The person's terminal and surroundings.
    (
        &["std::env", "std::process", "io::stdout", "io::stderr"],
        &["main.rs"],
    ),
    (&["clap::"], &["cli.rs", "main.rs"]),
    // The clock: a date comes from the job, nobody measures the time.
    (
        &["SystemTime", "Instant::now", "Local::now", "Utc::now"],
        &[],
    ),
    // Libraries with a way of their own are met in one place each.
    (
        &["typst::", "typst_pdf::", "typst_layout::", "comemo::"],
        &["document/"],
    ),
    (&["plotters::"], &["figures/"]),
    (&["calamine::"], &["read/workbook"]),
    (&["csv::Reader"], &[]),
    (&["zip::"], &["read/weight", "read/tests"]),
    (&["csv::Writer"], &["job/schedule", "register.rs"]),
    (&["rust_xlsxwriter::"], &["job/"]),
];

/// Longest source file, lines, its unit tests included.
const LONGEST_FILE: usize = 650;

/// What may lie at the top of the tree, beside hidden entries and what git ignores.
const TOP: &[&str] = &[
    "Cargo.lock",
    "Cargo.toml",
    "DEVELOPERS.md",
    "LICENSE-APACHE",
    "LICENSE-MIT",
    "README.md",
    "demo_data",
    "src",
    "target",
    "templates",
    "tests",
];

/// One source file without its comments and tests.
struct Source {
    /// Path below `src`, with forward slashes.
    path: String,
    code: String,
}

impl Source {
    /// Names of the modules from the crate down to this file.
    fn module(&self) -> Vec<&str> {
        let path = self.path.trim_end_matches(".rs");
        let path = path.strip_suffix("/mod").unwrap_or(path);
        path.split('/').collect()
    }
}

/// Every source file that goes into the program.
fn sources() -> Vec<Source> {
    let src = root().join("src");
    let mut found = Vec::new();
    let mut test_modules = Vec::new();
    for file in files_below(&src, ".rs") {
        let path = file.strip_prefix(&src).expect("below src");
        let text = fs::read_to_string(&file).expect("a source is text");
        let source = Source {
            path: path.to_string_lossy().replace('\\', "/"),
            code: code_of(&text),
        };
        let folder = source
            .path
            .rsplit_once('/')
            .map_or("", |(folder, _)| folder);
        test_modules.extend(declared_for_tests(&text).into_iter().map(|name| {
            match name.strip_suffix(".rs") {
                // Named by `#[path]`, from the folder of the file.
                Some(name) => format!("{folder}/{name}")
                    .trim_start_matches('/')
                    .to_owned(),
                None => [source.module(), vec![name]].concat().join("/"),
            }
        }));
        found.push(source);
    }
    found.retain(|source| !test_modules.contains(&source.module().join("/")));
    assert!(found.len() > 10, "the sources were found");
    found
}

/// The modules that a file declares for tests alone and keeps in files of their own: names, or file
/// names where `#[path]` gives them.
fn declared_for_tests(text: &str) -> Vec<&str> {
    text.split("#[cfg(test)]\n")
        .skip(1)
        .filter_map(|after| after.lines().next())
        .filter_map(|line| {
            let name = line
                .strip_prefix("mod ")
                .and_then(|rest| rest.strip_suffix(';'));
            let path = line
                .strip_prefix("#[path = \"")
                .and_then(|rest| rest.strip_suffix("\"]"));
            name.or(path)
        })
        .collect()
}

/// A source without comments and without the test modules at its end.
fn code_of(text: &str) -> String {
    let code: String = text
        .lines()
        .filter(|line| !line.trim_start().starts_with("//"))
        .map(|line| format!("{line}\n"))
        .collect();
    let tests = code
        .match_indices("#[cfg(test)]\nmod ")
        .find(|(at, _)| {
            // `mod tests;` names another file and ends nothing.
            code[*at..]
                .lines()
                .nth(1)
                .is_some_and(|line| line.ends_with('{'))
        })
        .map_or(code.len(), |(at, _)| at);
    code[..tests].to_owned()
}

/// Every path from the crate's root that a file names, without `crate::`.
fn paths_from_root(source: &Source) -> Vec<String> {
    let depth = source.module().len();
    let climbing = "super::".repeat(depth);
    let mut found = Vec::new();
    for start in ["crate::", climbing.as_str()] {
        for (at, _) in source.code.match_indices(start) {
            let before = source.code[..at].chars().next_back();
            if before.is_some_and(|sign| sign.is_alphanumeric() || "_$:".contains(sign)) {
                continue;
            }
            collect_paths(&source.code[at + start.len()..], "", &mut found);
        }
    }
    found
}

/// Reads one path, or a group of them in braces, from the beginning of `text`; what follows.
fn collect_paths<'a>(text: &'a str, prefix: &str, found: &mut Vec<String>) -> &'a str {
    let text = text.trim_start();
    if let Some(mut rest) = text.strip_prefix('{') {
        loop {
            rest = rest.trim_start_matches(|sign: char| sign == ',' || sign.is_whitespace());
            if let Some(after) = rest.strip_prefix('}') {
                return after;
            }
            if rest.is_empty() {
                return rest;
            }
            rest = collect_paths(rest, prefix, found);
            // `as another_name`
            rest = rest.trim_start_matches(|sign: char| sign != ',' && sign != '}');
        }
    }
    let end = text
        .find(|sign: char| !sign.is_alphanumeric() && sign != '_' && sign != '*')
        .unwrap_or(text.len());
    let path = format!("{prefix}{}", &text[..end]);
    match text[end..].strip_prefix("::") {
        Some(rest) if !rest.starts_with('<') => collect_paths(rest, &format!("{path}::"), found),
        _ => {
            found.push(path);
            &text[end..]
        }
    }
}

/// What is wrong with one path of one file, where something is.
fn fault(module: &str, path: &str) -> Option<String> {
    let target = path.split("::").next().unwrap_or(path);
    if target == module || module == "lib" || module == "main" {
        return None;
    }
    let Some((_, allowed)) = MAY_IMPORT.iter().find(|(name, _)| *name == module) else {
        return Some(format!("`{module}` has no place in the order of the house"));
    };
    if !allowed.iter().any(|group| group.contains(&target)) {
        return Some(format!("`{module}` may not import `{path}`"));
    }
    let names_type = path
        .split("::")
        .any(|part| part.starts_with(|sign: char| sign.is_uppercase()));
    if TYPES_ALONE.contains(&module) && STAGES.contains(&target) && !names_type {
        return Some(format!(
            "`{module}` may name types of `{target}` alone, not `{path}`"
        ));
    }
    None
}

#[test]
fn a_file_imports_only_from_lines_above_it() {
    let mut faults = Vec::new();
    for source in sources() {
        let module = source.module()[0].to_owned();
        for path in paths_from_root(&source) {
            if let Some(fault) = fault(&module, &path) {
                faults.push(format!("src/{}: {fault}", source.path));
            }
        }
    }
    assert!(faults.is_empty(), "{faults:#?}");
}

#[test]
fn the_table_itself_keeps_the_order() {
    for (index, (module, allowed)) in MAY_IMPORT.iter().enumerate() {
        for target in allowed.iter().copied().flatten() {
            let above = MAY_IMPORT[..index].iter().any(|(name, _)| name == target);
            // Within the ground one group is shared; `fault` still holds a module to its row.
            assert!(above, "`{module}` stands above `{target}`");
        }
    }
}

#[test]
fn the_disk_the_clock_and_each_library_are_met_in_their_place_alone() {
    let mut faults = Vec::new();
    for source in sources() {
        for (words, places) in RESERVED {
            if places.iter().any(|place| source.path.starts_with(place)) {
                continue;
            }
            for word in *words {
                for line in source.code.lines().filter(|line| says(line, word)) {
                    faults.push(format!("src/{}: {}", source.path, line.trim()));
                }
            }
        }
    }
    assert!(faults.is_empty(), "{faults:#?}");
}

/// Whether a line of code says a word that is not the end of a longer one (`pdfs::`).
fn says(line: &str, word: &str) -> bool {
    line.match_indices(word).any(|(at, _)| {
        let before = line[..at].chars().next_back();
        word.starts_with('.') || !before.is_some_and(|sign| sign.is_alphanumeric() || sign == '_')
    })
}

#[test]
fn the_fuzzer_takes_in_all_that_the_reader_needs() {
    let taken = fs::read_to_string(root().join("tests/fuzz/src/lib.rs")).expect("text");
    for module in GROUND.iter().chain(&["read", "steps"]) {
        assert!(taken.contains(&format!("pub mod {module};")), "{module}");
    }
}

#[test]
fn no_file_is_too_long_to_read() {
    let folders = ["src", "tests/it", "demo_data/simulator", "templates"];
    let long: Vec<String> = folders
        .iter()
        .map(|folder| root().join(folder))
        .filter(|folder| folder.is_dir())
        .flat_map(|folder| [files_below(&folder, ".rs"), files_below(&folder, ".typ")].concat())
        .filter_map(|path| {
            let lines = fs::read_to_string(&path).expect("text").lines().count();
            (lines > LONGEST_FILE).then(|| format!("{}: {lines} lines", path.display()))
        })
        .collect();
    assert!(long.is_empty(), "{long:#?}");
}

#[test]
fn nothing_else_lies_at_the_top() {
    let strays: Vec<String> = names_in(root())
        .into_iter()
        .filter(|name| !name.starts_with('.') && !TOP.contains(&name.as_str()))
        .collect();
    assert!(strays.is_empty(), "{strays:?}");
}

#[test]
fn the_reader_of_sources_finds_what_it_should() {
    let paths = |path: &str, code: &str| {
        paths_from_root(&Source {
            path: path.into(),
            code: code_of(code),
        })
    };
    assert_eq!(
        paths(
            "figures/axis.rs",
            "// crate::no\nuse crate::{record::{Record, Log as L}, trace};\nlet a = crate::design::design::<f64>(x);"
        ),
        ["record::Record", "record::Log", "trace", "design::design"]
    );
    // Climbing to the root is seen, climbing within the module is no import.
    assert_eq!(
        paths(
            "figures/axis.rs",
            "use super::super::document; use super::Canvas;"
        ),
        ["document"]
    );
    assert_eq!(
        paths("steps.rs", "use super::design::design;"),
        ["design::design"]
    );
    // A test may reach anywhere; what follows `mod tests;` is no test.
    let code =
        "#[cfg(test)]\nmod tests;\nuse crate::a;\n#[cfg(test)]\nmod more {\nuse crate::b;\n}";
    assert_eq!(paths("x.rs", code), ["a"]);
    assert_eq!(declared_for_tests(code), ["tests"]);
    let code = "#[cfg(test)]\n#[path = \"x_tests.rs\"]\nmod tests;\nmod y;";
    assert_eq!(declared_for_tests(code), ["x_tests.rs"]);

    assert!(fault("steps", "design::design").is_some());
    assert!(fault("quantity", "notice::Problem").is_some());
    assert!(fault("figures", "identify::identify").is_some());
    assert!(fault("figures", "predict::trial").is_some());
    assert!(fault("figures", "identify::Verdict::Accepted").is_none());
    assert!(fault("nowhere", "trace").is_some());
    assert!(says("use std::fs;", "std::fs") && says("x = fs::read()", "fs::"));
    assert!(!says("let x = pdfs::new()", "fs::"));
}
