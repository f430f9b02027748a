//! Text as people write it, in any script, and a site's own templates and fonts.

use super::sample;
use super::tests::{holds, lacks, pages_of, searchable};
use super::*;

fn overriding(name: &str, text: &str) -> Templates {
    Templates::new(BTreeMap::from([(
        name.to_owned(),
        text.as_bytes().to_vec(),
    )]))
}

#[test]
fn text_from_spreadsheets_is_printed_as_it_stands() {
    let service = "#let x = [*bold* _it_ $m$ @ref <label> \\ ~ `raw` // -- \"q\"";
    let long = "A very long service description ".repeat(12);
    let mut record = sample::full();
    record.control_loop.service = service.to_owned();
    record.control_loop.conditions = Some(format!("Ms Tan present, {long}"));
    record.document.plant = "Рафинерия Ωμέγα – Øst, Île, Łódź".to_owned();
    record.document.signatures[0].name = Some("a\u{7}b\r\nc #panic()".to_owned());
    record.document.remarks[0].text = "Ms Tan of operations asked for Ms 1.4".to_owned();
    let pages = pages_of(&record);
    holds(
        &pages[0],
        &[
            service,
            "Рафинерия Ωμέγα – Øst, Île, Łódź",
            "a b c #panic()",
            "Ms Tan of operations asked for Ms 1.4",
        ],
    );
    holds(&pages.join(" "), &[long.trim()]);
}

#[test]
fn scripts_beside_the_latin_one_are_set_in_their_own_fonts() {
    let services = [
        "درجة حرارة البرج",
        "טמפרטורת העמודה",
        "स्तंभ का तापमान",
        "อุณหภูมิหอกลั่น",
        "სვეტის ტემპერატურა",
        "Սյունակի ջերմաստիճան",
        "Ректификация колоннасы, Қарағанды",
        "Θερμοκρασία στήλης",
        "⌀ 80 ∅ ① ℃ ȳ ⇒",
    ];
    let mut record = sample::full();
    record.control_loop.service = services[0].to_owned();
    record.document.plant = services[1].to_owned();
    record.document.owner = services[2].to_owned();
    record.control_loop.conditions = Some(services.join("; "));
    let mut figures = sample::figures();
    // Scripts mixed in one label.
    let mixed = [0, 1, 4, 5, 6, 7, 8].map(|k| services[k]).join(" ");
    figures[0].svg = figures[0].svg.replace("PV, °C", &format!("PV, {mixed}"));
    typeset_record(&record, &figures, &[], &Templates::default()).expect("all of it is drawn");
    let texts =
        record_page_texts(&record, &figures, &Templates::default()).expect("a record is typeset");
    // Signs of a right-to-left run come out in the order they are painted in; none is lost.
    let signs = |text: &str| {
        let mut signs: Vec<char> = text.chars().filter(|c| !c.is_whitespace()).collect();
        signs.sort_unstable();
        signs
    };
    for (page, wanted) in [(0, services[..3].concat()), (1, services.concat())] {
        let mut there = signs(&texts[page]);
        for sign in signs(&wanted) {
            let at = there.binary_search(&sign);
            there.remove(at.unwrap_or_else(|_| panic!("page {page}: {sign} is lost")));
        }
    }
}

/// The five signs of this font stand for a script that the project's fonts do not have.
const SITE_FONT: &[u8] = include_bytes!("../../tests/fonts/five-signs.ttf");

#[test]
fn a_font_of_the_site_draws_what_the_others_cannot() {
    let mut record = sample::full();
    record.control_loop.service = "反应釜温度".to_owned();
    let without = Templates::default();
    let with = Templates::new(BTreeMap::from([(
        "fonts/Site.TTF".to_owned(),
        SITE_FONT.to_vec(),
    )]));
    assert_eq!(Alphabet::new(&without).lacks("温 °C"), Some('温'));
    assert_eq!(Alphabet::new(&with).lacks("温 °C"), None);
    assert_eq!(
        Alphabet::new(&without).lacks_for(&record),
        Some(('反', "反应釜温度".to_owned()))
    );
    assert_eq!(Alphabet::new(&with).lacks_for(&record), None);
    let mut figures = sample::figures();
    figures[0].svg = figures[0].svg.replace("PV, °C", "PV 温度");
    assert!(typeset_record(&record, &figures, &[], &without).is_err());
    typeset_record(&record, &figures, &[], &with).expect("the font of the site has it");
    let texts = record_page_texts(&record, &figures, &with).expect("a record is typeset");
    holds(&searchable(&texts)[0], &["TIC-207 反应釜温度"]);
}

#[test]
fn signs_that_are_never_drawn_need_no_font() {
    let mut record = sample::full();
    record.control_loop.service = "A\u{200f}B\u{2060}C\u{feff}D\u{ad}E\u{fe0f}".to_owned();
    assert_eq!(
        Alphabet::new(&Templates::default()).lacks_for(&record),
        None
    );
    let pages = record_page_texts(&record, &sample::figures(), &Templates::default());
    assert!(pages.is_ok(), "{pages:?}");
}

#[test]
fn a_character_no_font_has_is_named_with_its_text() {
    let mut record = sample::full();
    record.control_loop.service = "Column 漢 temperature".to_owned();
    let error = typeset_record(&record, &sample::figures(), &[], &Templates::default())
        .expect_err("no font has the character");
    let DocumentError::MissingCharacter {
        text,
        character,
        place,
    } = &error
    else {
        panic!("another error: {error}");
    };
    assert_eq!((*character, place.as_str()), ('漢', "page 1"));
    assert!(text.contains("漢"), "{text}");
    assert!(error.to_string().contains("(U+6F22)"), "{error}");
    assert!(error.hint().is_some());

    let mut figures = sample::figures();
    figures[0].svg = figures[0].svg.replace("PV, °C", "PV, 漢");
    let error = typeset_record(&sample::full(), &figures, &[], &Templates::default())
        .expect_err("no font has the character");
    assert_eq!(
        error,
        DocumentError::MissingCharacter {
            text: "PV, 漢".to_owned(),
            character: '漢',
            place: "figure test.svg".to_owned(),
        }
    );
}

#[test]
fn a_wrong_template_is_reported_with_file_line_and_hint() {
    let broken = overriding(
        "trial.typ",
        "#import \"rules.typ\": *\n\n  #let trial(t) = t.hedding\n",
    );
    let error = typeset_record(&sample::full(), &sample::figures(), &[], &broken)
        .expect_err("the template asks for what is not there");
    assert_eq!(
        error,
        DocumentError::Template(
            "trial.typ:3:21: dictionary does not contain key \"hedding\"".to_owned()
        )
    );
    let unclosed = overriding("trial.typ", "#let trial(t) = {\n");
    let error = typeset_record(&sample::full(), &sample::figures(), &[], &unclosed)
        .expect_err("the template is not closed");
    assert!(
        error
            .to_string()
            .starts_with("trial.typ:1:17: unclosed delimiter"),
        "{error}"
    );
    let unknown = overriding("trial.typ", "#let trial(t) = t-heading");
    let error = typeset_record(&sample::full(), &sample::figures(), &[], &unknown)
        .expect_err("there is no such name");
    let text = error.to_string();
    assert!(
        text.starts_with(
            "trial.typ:1:17: unknown variable: t-heading\n    hint: if you meant to use subtraction"
        ),
        "{text}"
    );
    let not_text = Templates::new(BTreeMap::from([("trial.typ".to_owned(), vec![0xff])]));
    assert!(matches!(
        typeset_record(&sample::full(), &sample::figures(), &[], &not_text),
        Err(DocumentError::TemplateEncoding { .. })
    ));
}

#[test]
fn what_the_typesetter_warns_of_is_handed_on_with_its_place() {
    let templates = overriding(
        "trial.typ",
        "#let trial(t) = {\n  text(font: \"No Such Family\")[Trial.]\n}\n",
    );
    let typeset = typeset_record(&sample::full(), &sample::figures(), &[], &templates)
        .expect("a record is typeset");
    assert_eq!(
        typeset.warnings,
        ["trial.typ:2:14: unknown font family: no such family"]
    );
}

#[test]
fn a_site_may_replace_one_template_and_add_a_logo() {
    let mut files = BTreeMap::from([(
        "trial.typ".to_owned(),
        b"#let trial(t) = [Trial in the words of the site.]".to_vec(),
    )]);
    files.insert(
        "logo.svg".to_owned(),
        sample::figures()[3].svg.clone().into_bytes(),
    );
    let templates = Templates::new(files);
    let texts = record_page_texts(&sample::full(), &sample::figures(), &templates)
        .expect("a record is typeset");
    let pages = searchable(&texts);
    holds(&pages.join(" "), &["Trial in the words of the site."]);
    lacks(&pages, &["8 Closed-loop trial"]);
    let pdf = typeset_record(&sample::full(), &sample::figures(), &[], &templates)
        .expect("a record with a logo is typeset");
    assert!(pdf.pdf.starts_with(b"%PDF"));
}
