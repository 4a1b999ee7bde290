//! Files that are made from the program: manual pages and the JSON schema. `UPDATE=1 cargo test generated` rewrites
//! them, without it they are compared.

use clap::Command;
use cosetta::diagnostic::Code;
use cosetta::report::facets::FacetsRecord;
use cosetta::report::record::{EnumerationRecord, MaterialRecord};
use std::fs;
use std::path::Path;

fn compare(name: &str, content: &str) {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("man").join(name);
    if std::env::var_os("UPDATE").is_some() {
        fs::write(&path, content).expect("a writable file");
        return;
    }
    let stored = fs::read_to_string(&path).unwrap_or_default();
    assert!(stored == content, "man/{name} is out of date; run: UPDATE=1 cargo test generated");
}

fn page(command: Command, name: &str, diagnostics: bool) {
    let command = command.bin_name(name.replace('-', " "));
    let manual = clap_mangen::Man::new(command)
        .title(name.to_owned())
        .date("")
        .source(concat!("cosetta ", env!("CARGO_PKG_VERSION")));
    let mut bytes = Vec::new();
    manual.render(&mut bytes).expect("a page");
    let mut text = String::from_utf8(bytes).expect("text");
    if diagnostics {
        text.push_str(".SH DIAGNOSTICS\n");
        for code in Code::ALL {
            text.extend([".TP\n", code.as_str(), "\n", code.cause(), ". Remedy: ", code.remedy(), ".\n"]);
        }
    }
    compare(&format!("{name}.1"), &text);
}

#[test]
fn generated_manual_pages() {
    let command = cosetta::cli::command();
    page(command.clone(), "cosetta", true);
    for subcommand in command.get_subcommands() {
        let name = format!("cosetta-{}", subcommand.get_name());
        page(subcommand.clone(), &name, false);
        for inner in subcommand.get_subcommands() {
            page(inner.clone(), &format!("{name}-{}", inner.get_name()), false);
        }
    }
}

#[test]
fn generated_schema() {
    let schema = |schema: schemars::Schema| serde_json::to_string_pretty(&schema).expect("JSON") + "\n";
    compare("classify.schema.json", &schema(schemars::schema_for!(MaterialRecord)));
    compare("facets.schema.json", &schema(schemars::schema_for!(FacetsRecord)));
    compare("enumerate.schema.json", &schema(schemars::schema_for!(EnumerationRecord)));
}
