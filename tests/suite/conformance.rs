//! The conformance suite of the CIF reader: cases in plain files, `tests/conformance/*.txt`. The README there gives the
//! format.

use cosetta::charge::Given;
use cosetta::cif::{Block, Dialect, Document, Item, Table, Value, ValueKind, parse, read_bytes};
use cosetta::collection::{Settings, classify_bytes};
use cosetta::crystal::Site;
use cosetta::diagnostic::{Code, Diagnostic};
use std::collections::BTreeSet;
use std::fmt::Write;
use std::path::{Path, PathBuf};

/// One case of a file.
#[derive(Debug, Default)]
struct Case {
    name: String,
    line: usize,
    mode: String,
    charges: Option<String>,
    block: Option<String>,
    symmetry_tolerance: Option<f64>,
    input: Vec<u8>,
    expected: Vec<String>,
    has_source: bool,
}

fn files() -> Vec<PathBuf> {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/conformance");
    let entries = std::fs::read_dir(folder).expect("the folder is there");
    let mut files: Vec<PathBuf> = entries
        .map(|entry| entry.expect("readable").path())
        .filter(|path| path.extension().is_some_and(|extension| extension == "txt"))
        .collect();
    files.sort();
    files
}

fn cases(text: &str) -> Vec<Case> {
    let lines: Vec<&str> = text.lines().collect();
    let starts: Vec<usize> = (0..lines.len()).filter(|&n| lines[n].starts_with("=== ")).collect();
    let ends = starts.iter().skip(1).copied().chain([lines.len()]);
    starts.iter().zip(ends).map(|(&start, end)| case(&lines[start..end], start + 1)).collect()
}

fn case(lines: &[&str], line: usize) -> Case {
    let mut case =
        Case { name: lines[0][4..].trim().to_owned(), line, mode: "parse".into(), ..Case::default() };
    let (mut line_end, mut has_escapes, mut has_end) = ("\n", false, true);
    let mut body = 1;
    while let Some(attribute) = lines.get(body).and_then(|line| line.strip_prefix("@ ")) {
        match attribute.split_once(' ').unwrap_or((attribute, "")) {
            ("source", _) => case.has_source = true,
            ("escapes", _) => has_escapes = true,
            ("no-final-newline", _) => has_end = false,
            ("line-ends", "cr") => line_end = "\r",
            ("line-ends", "crlf") => line_end = "\r\n",
            ("mode", mode) => mode.clone_into(&mut case.mode),
            ("charges", charges) => case.charges = Some(charges.to_owned()),
            ("block", block) => case.block = Some(block.to_owned()),
            ("symmetry-tolerance", length) => {
                case.symmetry_tolerance = Some(length.parse().expect("a length"))
            }
            other => panic!("case '{}': unknown attribute {other:?}", case.name),
        }
        body += 1;
    }
    let divide = lines
        .iter()
        .position(|line| *line == "---")
        .unwrap_or_else(|| panic!("case '{}': no ---", case.name));
    let mut input = lines[body..divide].join(line_end);
    if has_end && divide > body {
        input.push_str(line_end);
    }
    case.input = if has_escapes { unescape(&input) } else { input.into_bytes() };
    let expected = lines[divide + 1..].iter().map(|line| line.trim()).filter(|line| !line.is_empty());
    case.expected = expected.map(str::to_owned).collect();
    case
}

/// `<XX>` stands for a byte.
fn unescape(text: &str) -> Vec<u8> {
    let (bytes, mut result, mut at) = (text.as_bytes(), Vec::new(), 0);
    while at < bytes.len() {
        let digits =
            bytes.get(at + 1..at + 3).filter(|_| bytes[at] == b'<' && bytes.get(at + 3) == Some(&b'>'));
        let byte = digits
            .and_then(|digits| std::str::from_utf8(digits).ok())
            .and_then(|digits| u8::from_str_radix(digits, 16).ok());
        result.push(byte.unwrap_or(bytes[at]));
        at += if byte.is_some() { 4 } else { 1 };
    }
    result
}

fn found(case: &Case) -> Vec<String> {
    match case.mode.as_str() {
        "parse" => parsed(&case.input),
        "read" => read(&case.input),
        "classify" => classified(case),
        other => panic!("case '{}': unknown mode {other}", case.name),
    }
}

fn parsed(input: &[u8]) -> Vec<String> {
    let (document, diagnostics) = parse(input);
    let mut lines = Vec::new();
    if document.dialect() == Dialect::Two {
        lines.push("edition 2".to_owned());
    }
    for block in document.blocks() {
        lines.push(format!("block {}", block.name).trim_end().to_owned());
        contents(&document, &block, &mut lines);
    }
    lines.extend(diagnostics.iter().map(finding));
    lines
}

/// Items and save frames in the order of the file.
fn contents(document: &Document<'_>, block: &Block<'_, '_>, lines: &mut Vec<String>) {
    let mut parts: Vec<(usize, Vec<String>)> = Vec::new();
    for item in block.items() {
        match item {
            Item::Pair(pair) => {
                let line = format!("{} {}", pair.tag.name, shown(document, &pair.value));
                parts.push((pair.tag.span.start, vec![line]));
            }
            Item::Loop(table) => {
                parts.push((table.span().map_or(0, |span| span.start), looped(document, &table)));
            }
        }
    }
    for frame in block.frames() {
        let mut own = vec![format!("frame {}", frame.name)];
        contents(document, &frame, &mut own);
        own.push("end".into());
        parts.push((frame.span.start, own));
    }
    parts.sort_by_key(|(start, _)| *start);
    lines.extend(parts.into_iter().flat_map(|(_, own)| own));
}

fn looped(document: &Document<'_>, table: &Table<'_, '_>) -> Vec<String> {
    let tags: Vec<String> = table.tags().flatten().map(|tag| tag.name.into_owned()).collect();
    let mut lines = vec![format!("loop {}", tags.join(" "))];
    for row in table.iter() {
        let values: Vec<String> = (0..tags.len())
            .filter_map(|column| row.value(column))
            .map(|value| shown(document, value))
            .collect();
        lines.push(format!("row {}", values.join(" | ")));
    }
    lines
}

fn shown(document: &Document<'_>, value: &Value<'_>) -> String {
    let quoted = |text: &str| serde_json::to_string(text).expect("a text");
    let members = || document.elements(value).into_iter();
    match value.kind {
        ValueKind::Inapplicable => ".".into(),
        ValueKind::Unknown => "?".into(),
        ValueKind::Quoted => format!("quoted {}", quoted(&value.text)),
        ValueKind::Text => format!("text {}", quoted(&value.text)),
        ValueKind::List => {
            let members: Vec<String> = members().map(|member| shown(document, &member.value)).collect();
            format!("list [{}]", members.join(", "))
        }
        ValueKind::Table => {
            let member =
                |key: &str, value: &Value<'_>| format!("{}: {}", quoted(key), shown(document, value));
            let members: Vec<String> = members()
                .map(|found| member(found.key.as_deref().unwrap_or_default(), &found.value))
                .collect();
            format!("table {{{}}}", members.join(", "))
        }
        _ => format!("bare {}", quoted(&value.text)),
    }
}

fn finding(found: &Diagnostic) -> String {
    format!("! {} {}{}", found.code, found.severity, place(found))
}

fn place(found: &Diagnostic) -> String {
    found.span.map_or_else(String::new, |span| format!(" {}:{}", span.line, span.column))
}

/// Up to six decimals, without zeros at the end.
fn number(value: f64) -> String {
    let text = format!("{value:.6}");
    let text = text.trim_end_matches('0').trim_end_matches('.');
    if text == "-0" { "0".into() } else { text.into() }
}

fn in_order(mut diagnostics: Vec<&Diagnostic>) -> Vec<String> {
    diagnostics.sort_by_key(|found| found.span.map_or(usize::MAX, |span| span.start));
    diagnostics.into_iter().map(finding).collect()
}

fn read(input: &[u8]) -> Vec<String> {
    let reading = read_bytes(input);
    let mut lines = Vec::new();
    for block in &reading.blocks {
        lines.push(format!("block {}", block.name).trim_end().to_owned());
        match &block.unit {
            Err(refusal) => lines.push(format!("refused {}{}", refusal.code, place(refusal))),
            Ok(unit) => {
                let cell = unit.lattice.parameters();
                let numbers: Vec<String> = cell.lengths.into_iter().chain(cell.angles).map(number).collect();
                lines.push(format!("cell {}", numbers.join(" ")));
                lines.push(format!("operations {}", unit.operations.len()));
                lines.extend(unit.sites.iter().map(site));
            }
        }
    }
    let of_blocks = reading.blocks.iter().flat_map(|block| &block.diagnostics);
    lines.extend(in_order(reading.diagnostics.iter().chain(of_blocks).collect()));
    lines
}

fn site(site: &Site) -> String {
    let position: Vec<String> = site.position.iter().map(|x| number(*x)).collect();
    let mut line = format!("site {} {} {}", site.label, site.element, position.join(" "));
    if site.occupancy < 1.0 {
        write!(line, " occupancy {}", number(site.occupancy)).expect("a text");
    }
    if let Some(oxidation) = site.oxidation {
        write!(line, " oxidation {}", number(oxidation)).expect("a text");
    }
    line
}

fn classified(case: &Case) -> Vec<String> {
    let charges = match case.charges.as_ref().map(|charges| charges.parse::<Given>()).transpose() {
        Ok(charges) => charges,
        Err(refusal) => return vec![format!("refused {}", refusal.code)],
    };
    let settings = Settings {
        charges,
        block: case.block.clone(),
        symmetry_tolerance: case.symmetry_tolerance.unwrap_or(Settings::default().symmetry_tolerance),
        ..Settings::default()
    };
    let materials = classify_bytes("case.cif", &case.input, &settings);
    let mut lines = Vec::new();
    for material in &materials {
        lines.push(format!("block {}", material.block).trim_end().to_owned());
        match &material.classification.outcome {
            Err(refusal) => lines.push(format!("refused {}{}", refusal.code, place(refusal))),
            Ok(formal) => {
                let offset: Vec<String> = formal.electron().offset.iter().map(ToString::to_string).collect();
                lines.push(format!("label {}", formal.label));
                lines.push(format!("offset {}", offset.join(" ")));
            }
        }
    }
    lines.extend(in_order(
        materials.iter().flat_map(|material| &material.classification.diagnostics).collect(),
    ));
    lines
}

#[test]
fn conformance_cases() {
    let mut faults = String::new();
    let mut count = 0;
    for path in files() {
        let text = std::fs::read_to_string(&path).expect("UTF-8");
        let file = path.file_name().expect("a file").to_string_lossy().into_owned();
        let mut names = BTreeSet::new();
        for case in cases(&text) {
            count += 1;
            assert!(names.insert(case.name.clone()), "{file}: '{}' is there twice", case.name);
            assert!(case.has_source, "{file}: '{}' names no source", case.name);
            let found = found(&case);
            if found != case.expected {
                let list = |lines: &[String]| {
                    lines.iter().fold(String::new(), |text, line| text + "    " + line + "\n")
                };
                write!(
                    faults,
                    "tests/conformance/{file}:{}: {}\n  expected\n{}  found\n{}",
                    case.line,
                    case.name,
                    list(&case.expected),
                    list(&found)
                )
                .expect("a text");
            }
        }
    }
    assert!(faults.is_empty(), "{} cases; these differ:\n{faults}", count);
    assert!(count >= 150, "only {count} cases");
}

/// Codes that no known file shows: they guard against faults of the symmetry search.
const NEEDS_MORE: [Code; 2] = [Code::SymmetryEngine, Code::SymmetryMoved];

#[test]
fn conformance_cases_show_every_code_of_the_reader() {
    let mut text = String::new();
    for path in files() {
        text += &std::fs::read_to_string(&path).expect("UTF-8");
    }
    let of_reader = |code: &&Code| {
        ["file-004", "cif-", "cell-", "site-", "symmetry-"]
            .iter()
            .any(|family| code.as_str().starts_with(family))
    };
    let missing: Vec<&Code> = Code::ALL
        .iter()
        .filter(of_reader)
        .filter(|code| !NEEDS_MORE.contains(code))
        .filter(|code| !text.contains(&format!("! {code} ")) && !text.contains(&format!("refused {code}")))
        .collect();
    assert!(missing.is_empty(), "no case shows {missing:?}");
}
