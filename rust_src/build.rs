//! Hands the documentation in `_core.pyi` to the compiled classes, so that `help()` shows what the stub says and it is
//! written once. A method says `#[doc = stub_doc!("Class.method")]`; a name the stub does not document stops the build.
#![allow(clippy::expect_used, clippy::panic, reason = "a build that cannot go on should say why and stop")]

use std::collections::BTreeMap;
use std::path::Path;
use std::{env, fs};

/// Where the documentation is written.
const STUB: &str = "python/perpend/_core.pyi";

fn main() {
    println!("cargo::rerun-if-changed={STUB}");
    println!("cargo::rerun-if-changed=rust_src/build.rs");
    if env::var_os("CARGO_FEATURE_PYTHON").is_none() {
        return;
    }
    let stub = fs::read_to_string(STUB).expect("the stub is part of the package");
    let folder = env::var_os("OUT_DIR").expect("cargo names the folder");
    for (name, text) in documented(&stub) {
        fs::write(Path::new(&folder).join(format!("{name}.txt")), text)
            .expect("the folder of the build is writable");
    }
}

/// Docstrings by dotted name: `Class`, `Class.method`, `function`.
fn documented(stub: &str) -> BTreeMap<String, String> {
    let mut found = BTreeMap::new();
    let mut class = String::new();
    let mut name = String::new();
    let mut lines = stub.lines();
    while let Some(line) = lines.next() {
        let indent = line.len() - line.trim_start().len();
        let line = line.trim();
        if let Some(rest) = line.strip_prefix("class ") {
            class = identifier(rest);
            name.clone_from(&class);
        } else if let Some(rest) = line.strip_prefix("def ") {
            let method = identifier(rest);
            name = if indent == 0 { method } else { format!("{class}.{method}") };
        } else if let Some(first) = line.strip_prefix("\"\"\"") {
            found.insert(name.clone(), docstring(first, indent, &mut lines));
        }
    }
    found
}

fn identifier(text: &str) -> String {
    text.chars().take_while(|c| c.is_alphanumeric() || *c == '_').collect()
}

/// The text up to the closing quotes, its lines less the indent.
fn docstring<'a>(first: &str, indent: usize, lines: &mut impl Iterator<Item = &'a str>) -> String {
    if let Some(only) = first.strip_suffix("\"\"\"") {
        return only.to_owned();
    }
    let mut text = vec![first];
    for line in lines {
        if line.trim() == "\"\"\"" {
            return text.join("\n").trim_end().to_owned();
        }
        let less = line.len() - line.trim_start().len();
        text.push(&line[less.min(indent)..]);
    }
    panic!("{STUB}: a docstring without an end");
}
