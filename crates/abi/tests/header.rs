//! `include/spinledger.h` is what cbindgen makes of this crate, and C and C++ compilers take it.
//!
//! After a change of the types: `SPINLEDGER_WRITE_HEADER=1 cargo test -p spinledger-abi --test header`.

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::{env, fs};

const PREAMBLE: &str = r#"/* The plugin interface of spinledger. Made from the crate `spinledger-abi`, whose documentation has the rules that hold throughout
 * (status, memory, threads, randomness, growth); in short: allocate and free on one side, return SL_OK or a message, draw random
 * numbers from given streams only, and call no libm: its last bits differ between systems (SlHost has exp, ln, sin, cos and pow).
 * Compile without fused operations (-ffp-contract=off).
 *
 * A library, at file scope:
 *
 *     SPINLEDGER_MANIFEST("{\"interface\":1,\"library\":\"mine\",\"version\":\"0.1.0\",\"licence\":\"MIT\",\"items\":[...]}");
 *     static const SlItem items[] = { { sizeof(SlItem), SL_LATTICE, 1, SL_TEXT("my-lattice"), &my_lattice } };
 *     SPINLEDGER_LIBRARY(items)
 */"#;

const AFTER_INCLUDES: &str = r#"
/* Keeps the manifest, JSON text, where it can be read without loading the library. */
#if defined(__APPLE__)
#define SPINLEDGER_MANIFEST_SECTION "__DATA,__spinledger"
#else
#define SPINLEDGER_MANIFEST_SECTION ".spinledger"
#endif
#define SPINLEDGER_MANIFEST(json) \
    __attribute__((used, section(SPINLEDGER_MANIFEST_SECTION))) static const char spinledger_manifest[] = json

/* An SlText of a string literal. */
#define SL_TEXT(literal) { (const uint8_t *)(literal), sizeof(literal) - 1 }

/* The sizes in SlLibrary.layout. */
#define SPINLEDGER_LAYOUT \
    { sizeof(SlValue), sizeof(SlGraph), sizeof(SlEnergy), sizeof(SlView), sizeof(SlTallies), sizeof(SlPrepare), \
      sizeof(SlBond), sizeof(SlItem) }

/* The entry function for an array of items. */
#ifdef __cplusplus
#define SPINLEDGER_EXTERN extern "C"
#else
#define SPINLEDGER_EXTERN extern
#endif
#define SPINLEDGER_LIBRARY(items) \
    SPINLEDGER_EXTERN __attribute__((visibility("default"))) const SlLibrary *spinledger_plugin(void); \
    const SlLibrary *spinledger_plugin(void) { \
        static const SlLibrary library = { SL_MAGIC, SL_INTERFACE_VERSION, sizeof(void *), sizeof(SlLibrary), \
                                           SPINLEDGER_LAYOUT, sizeof(items) / sizeof((items)[0]), items }; \
        return &library; \
    }
"#;

fn header() -> PathBuf {
    Path::new(env!("CARGO_MANIFEST_DIR")).join("include/spinledger.h")
}

fn generated() -> String {
    let sources = Path::new(env!("CARGO_MANIFEST_DIR")).join("src");
    let mut config = cbindgen::Config {
        language: cbindgen::Language::C,
        cpp_compat: true,
        include_guard: Some("SPINLEDGER_H".into()),
        header: Some(PREAMBLE.into()),
        after_includes: Some(AFTER_INCLUDES.into()),
        documentation_style: cbindgen::DocumentationStyle::C99,
        style: cbindgen::Style::Both,
        usize_is_size_t: true,
        line_length: 120,
        ..cbindgen::Config::default()
    };
    for name in ["INTERFACE_VERSION", "MAGIC", "ENTRY_SYMBOL", "SECTION", "SECTION_MACHO"] {
        config.export.rename.insert(name.into(), format!("SL_{name}"));
    }
    // No function takes the types, so each is asked for by name.
    let mut builder = cbindgen::Builder::new().with_config(config);
    for file in ["lib.rs", "data.rs", "sinks.rs", "tables.rs"] {
        let path = sources.join(file);
        let text = fs::read_to_string(&path).expect("a source file");
        for line in text.lines() {
            let word = line.strip_prefix("pub struct ").or_else(|| line.strip_prefix("pub type "));
            if let Some(rest) = word {
                let name: String = rest.chars().take_while(|c| c.is_alphanumeric()).collect();
                builder = builder.include_item(name);
            }
        }
        builder = builder.with_src(path);
    }
    let mut out = Vec::new();
    builder.generate().expect("cbindgen reads the sources").write(&mut out);
    // Links of Rust's documentation lead nowhere in a header.
    String::from_utf8(out).expect("cbindgen writes UTF-8").replace("[`", "`").replace("`]", "`").replace("crate::", "")
}

#[test]
fn the_header_is_up_to_date() {
    let generated = generated();
    if env::var_os("SPINLEDGER_WRITE_HEADER").is_some() {
        fs::write(header(), &generated).expect("the header can be written");
    }
    let committed = fs::read_to_string(header()).expect("the header is there");
    let different = committed.lines().zip(generated.lines()).position(|(a, b)| a != b);
    assert!(
        committed == generated,
        "include/spinledger.h differs from the crate, first in line {:?}: see the head of this test",
        different.map(|line| line + 1)
    );
}

/// Runs a compiler over a source that includes the header; false where there is no such compiler.
fn compiles(compiler: &str, arguments: &[&str], source: &str) -> bool {
    let folder = header();
    let folder = folder.parent().expect("a folder");
    let child = Command::new(compiler).args(arguments).arg("-I").arg(folder).arg("-").stdin(Stdio::piped()).spawn();
    let mut child = match child {
        Ok(child) => child,
        Err(error) if error.kind() == std::io::ErrorKind::NotFound => {
            assert!(env::var_os("CI").is_none(), "{compiler} is missing, and this is CI");
            return false;
        }
        Err(error) => panic!("{compiler}: {error}"),
    };
    let stdin = child.stdin.take().expect("a pipe");
    std::io::Write::write_all(&mut { stdin }, source.as_bytes()).expect("the compiler reads");
    assert!(child.wait().expect("the compiler ends").success(), "{compiler} {arguments:?} refuses the header");
    true
}

const LIBRARY: &str = r#"
#include "spinledger.h"
SPINLEDGER_MANIFEST("{}");
static const SlLattice lattice = { sizeof(SlLattice), 0, 0, 0 };
static const SlItem items[] = { { sizeof(SlItem), SL_LATTICE, 1, SL_TEXT("nothing"), &lattice } };
SPINLEDGER_LIBRARY(items)
"#;

#[test]
fn c_and_cpp_compilers_take_it_without_a_word() {
    let strict = ["-Wall", "-Wextra", "-Werror", "-fsyntax-only"];
    let c = [&["-std=c99", "-x", "c"], &strict[..]].concat();
    let cpp = [&["-std=c++14", "-x", "c++"], &strict[..]].concat();
    let done = compiles("gcc", &c, LIBRARY) as u32 + compiles("g++", &cpp, LIBRARY) as u32;
    assert!(done > 0 || env::var_os("CI").is_none(), "no compiler looked at the header");
}

/// What the C compiler lays out is what Rust lays out: sizes of every struct that `SlLibrary::layout` names, and some offsets.
#[test]
fn the_c_layout_is_the_rust_layout() {
    use spinledger_abi::{LAYOUT, SlEnergy, SlGraph, SlHost, SlLibrary, SlPrepare, SlTallies, SlUpdate, SlView};
    use std::mem::offset_of;
    let names = ["SlValue", "SlGraph", "SlEnergy", "SlView", "SlTallies", "SlPrepare", "SlBond", "SlItem"];
    let mut source = String::from("#include \"spinledger.h\"\n#include <stddef.h>\n");
    let mut claim = |k: usize, what: String| source.push_str(&format!("typedef char claim_{k}[({what}) ? 1 : -1];\n"));
    for (k, (name, size)) in names.iter().zip(LAYOUT).enumerate() {
        claim(k, format!("sizeof({name}) == {size}"));
    }
    let offsets = [
        ("SlGraph", "face_sites", offset_of!(SlGraph, face_sites)),
        ("SlEnergy", "colour_sites", offset_of!(SlEnergy, colour_sites)),
        ("SlHost", "derive_key", offset_of!(SlHost, derive_key)),
        ("SlLibrary", "items", offset_of!(SlLibrary, items)),
        ("SlPrepare", "group_key", offset_of!(SlPrepare, group_key)),
        ("SlUpdate", "path", offset_of!(SlUpdate, path)),
        ("SlTallies", "spare", offset_of!(SlTallies, spare)),
        ("SlView", "length", offset_of!(SlView, length)),
    ];
    for (k, (name, field, offset)) in offsets.into_iter().enumerate() {
        claim(names.len() + k, format!("offsetof({name}, {field}) == {offset}"));
    }
    compiles("gcc", &["-std=c99", "-x", "c", "-fsyntax-only"], &source);
}
