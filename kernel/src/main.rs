//! The one binary of Semiaxis: what clients start, and what a person types on the command line.

mod cells;
mod help;
mod notebook;
mod session;
mod setup;
mod wire;
mod worker;

fn main() {
    let mut reporter = setup::Reporter::new();
    match setup::ensure(&mut |event| reporter.show(event)) {
        Ok(kit) => println!("{}", kit.dir.display()),
        Err(error) => {
            eprintln!("semiaxis: {error}");
            std::process::exit(2);
        }
    }
}
