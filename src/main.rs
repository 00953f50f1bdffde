//! The program: everything is in the library.

use std::process::ExitCode;

fn main() -> ExitCode {
    // Before anything can open a TLS connection. An error means that a provider is installed
    // already, and this process has only one to install.
    let _installed = rustls::crypto::ring::default_provider().install_default();
    evenrow::cli::main()
}
