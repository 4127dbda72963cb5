//! Every command of the README, with the output shown there.
//!
//! `TRYCMD=overwrite cargo test --test readme` writes what the program says now into the README.

#[test]
fn commands_of_the_readme_print_what_it_shows() {
    trycmd::TestCases::new().case("README.md");
}
