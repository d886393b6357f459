//! The worker's host takes the place of the C library's function that opens files, for the libraries
//! that it loads; for that the linker has to list the function among the symbols of the program.

fn main() {
    for symbol in ["open64", "openat64", "semiaxis_take_opened"] {
        println!("cargo:rustc-link-arg-bins=-Wl,--export-dynamic-symbol={symbol}");
    }
    println!("cargo:rerun-if-changed=build.rs");
}
