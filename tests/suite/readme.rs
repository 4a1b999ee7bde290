//! The commands of the README give the output that it shows.

#[test]
fn commands_of_the_readme() {
    trycmd::TestCases::new().case("README.md").run();
}
