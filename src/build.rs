//! Rebuilds when a migration, a template or an asset is added: the macros that
//! embed these folders notice changed files, not new ones.

fn main() {
    println!("cargo:rerun-if-changed=migrations");
    println!("cargo:rerun-if-changed=templates");
    println!("cargo:rerun-if-changed=src/build.rs");
}
