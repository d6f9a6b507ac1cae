//! Words in, exit status out; everything else is in the library.

fn main() -> std::process::ExitCode {
    steadytap::cli::run(std::env::args_os()).into()
}
