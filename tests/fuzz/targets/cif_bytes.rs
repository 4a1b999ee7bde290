//! Any bytes as a CIF: they are parsed, read and expanded to all atoms. Besides panics, this looks for spans that leave
//! the file and for loops that are no whole number of rows.

#![no_main]

use cosetta::cif::{Block, Document, Item, Value, parse, read_bytes};
use cosetta::crystal::ExpandTolerance;
use cosetta::diagnostic::{Diagnostic, Span};
use libfuzzer_sys::fuzz_target;

fuzz_target!(|bytes: &[u8]| {
    let (document, found) = parse(bytes);
    found.iter().for_each(|finding| check_finding(bytes, finding));
    document.blocks().for_each(|block| check_block(bytes, &block));

    let reading = read_bytes(bytes);
    assert_eq!(reading.blocks.len(), document.blocks().len(), "each block has its reading");
    for block in &reading.blocks {
        block.diagnostics.iter().for_each(|finding| check_finding(bytes, finding));
        match &block.unit {
            Err(refusal) => check_finding(bytes, refusal),
            Ok(unit) => match unit.expand(&ExpandTolerance::default()) {
                Err(refusal) => check_finding(bytes, &block.locate(refusal)),
                Ok((crystal, noticed)) => {
                    assert!(crystal.sites.len() >= unit.sites.len().min(1), "a site has at least one image");
                    noticed.into_iter().for_each(|finding| check_finding(bytes, &block.locate(finding)));
                }
            },
        }
    }
});

fn check_block(bytes: &[u8], block: &Block<'_, '_>) {
    check_span(bytes, block.span);
    for item in block.items() {
        match item {
            Item::Pair(pair) => {
                check_span(bytes, pair.tag.span);
                check_value(block.document(), &pair.value);
            }
            Item::Loop(table) => {
                table.span().into_iter().for_each(|span| check_span(bytes, span));
                let columns = table.tags().flatten().count();
                for row in table.iter() {
                    let values: Vec<_> = (0..columns).filter_map(|column| row.value(column)).collect();
                    assert_eq!(values.len(), columns, "whole rows");
                    values.into_iter().for_each(|value| check_value(block.document(), value));
                }
            }
        }
    }
    block.frames().for_each(|frame| check_block(bytes, &frame));
}

/// A value and the first of its members, down to a depth that a loop reaches quickly.
fn check_value(document: &Document<'_>, value: &Value<'_>) {
    check_span(document.source(), value.span);
    let mut value = value.clone();
    for _ in 0..4 {
        let Some(first) = document.elements(&value).into_iter().next() else { return };
        check_span(document.source(), first.value.span);
        value = first.value;
    }
}

fn check_finding(bytes: &[u8], finding: &Diagnostic) {
    if let Some(span) = finding.span {
        check_span(bytes, span);
    }
}

fn check_span(bytes: &[u8], span: Span) {
    assert!(
        span.start <= span.end && span.end <= bytes.len(),
        "{span:?} leaves the file of {} bytes",
        bytes.len()
    );
}
