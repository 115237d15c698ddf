//! Lists the circuit files of data/circuits, so that adding a circuit is adding a file.

use std::path::PathBuf;
use std::{env, fs, io};

fn main() -> io::Result<()> {
    let root = PathBuf::from(env::var_os("CARGO_MANIFEST_DIR").unwrap_or_default());
    let folder = root.join("data").join("circuits");
    let mut names: Vec<String> = fs::read_dir(&folder)?
        .filter_map(|entry| entry.ok()?.file_name().into_string().ok())
        .filter(|name| name.ends_with(".ron"))
        .collect();
    names.sort();
    let mut code = String::from("static FILES: &[(&str, &str)] = &[\n");
    for name in &names {
        let path = folder.join(name);
        code += &format!("    ({name:?}, include_str!({:?})),\n", path.display().to_string());
    }
    code += "];\n";
    fs::write(PathBuf::from(env::var_os("OUT_DIR").unwrap_or_default()).join("circuits.rs"), code)?;
    println!("cargo:rerun-if-changed={}", folder.display());
    Ok(())
}
