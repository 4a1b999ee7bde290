//! The commands of the README give the output that it shows.

#[test]
fn commands_of_the_readme() {
    // One example writes there, and the build may be elsewhere.
    std::fs::create_dir_all(concat!(env!("CARGO_MANIFEST_DIR"), "/target")).expect("a folder");
    trycmd::TestCases::new().case("README.md").run();
}
