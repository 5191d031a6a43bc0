//! The `halfcell` program: everything is in the library, so that tests and benches reach it.

fn main() -> std::process::ExitCode {
    halfcell::cli::run()
}
