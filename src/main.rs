use std::process::ExitCode;

fn main() -> ExitCode {
    burntally::cli::main()
}
