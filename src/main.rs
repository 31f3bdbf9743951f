//! The program: words from the command line to the library and back to an exit status.

fn main() -> std::process::ExitCode {
    nutate::cli::main()
}
