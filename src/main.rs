//! The program: see [`roundwell::cli`].

fn main() -> std::process::ExitCode {
    roundwell::cli::run(std::env::args_os())
}
