//! The migrations are embedded at build time; one that is added must cause a rebuild.
fn main() {
    println!("cargo:rerun-if-changed=migrations");
}
