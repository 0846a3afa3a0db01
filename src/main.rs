//! The program: everything it does is in the library; see [`gaptone::cli`].

fn main() -> std::process::ExitCode {
    gaptone::cli::main()
}
