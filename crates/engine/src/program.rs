//! What the records say of the program and the machine. None of it enters a key or a content.

use spinledger_ledger::{Processor, Program, Provenance, Streams};
use spinledger_terms::Value;

/// This program.
pub fn program() -> Program {
    Program {
        name: "spinledger".into(),
        version: env!("CARGO_PKG_VERSION").into(),
        commit: env!("SPINLEDGER_COMMIT").into(),
        compiler: env!("SPINLEDGER_COMPILER").into(),
    }
}

/// The random generator that chains use.
pub fn streams() -> Streams {
    Streams {
        generator: spinledger_numerics::random::Xoshiro::NAME.into(),
        version: spinledger_numerics::random::Xoshiro::VERSION,
    }
}

/// The processor that this runs on: its name as the system gives it, and the vector instruction sets that it has.
pub fn processor() -> Processor {
    Processor { model: processor_name(), features: features().join(" ") }
}

fn processor_name() -> String {
    let info = std::fs::read_to_string("/proc/cpuinfo").unwrap_or_default();
    let name = info.lines().find_map(|line| line.strip_prefix("model name")?.split_once(':'));
    name.map_or_else(|| std::env::consts::ARCH.to_owned(), |(_, name)| name.trim().to_owned())
}

#[cfg(target_arch = "x86_64")]
fn features() -> Vec<&'static str> {
    let mut features = Vec::new();
    if std::arch::is_x86_feature_detected!("avx2") {
        features.push("avx2");
    }
    if std::arch::is_x86_feature_detected!("avx512f") && std::arch::is_x86_feature_detected!("avx512bw") {
        features.push("avx512");
    }
    features
}

#[cfg(not(target_arch = "x86_64"))]
fn features() -> Vec<&'static str> {
    Vec::new()
}

/// The part of a record that is the same for everything made in this process.
pub fn provenance(parameters: Value, threads: usize) -> Provenance {
    Provenance {
        parameters,
        program: program(),
        processor: processor(),
        host: rustix::system::uname().nodename().to_string_lossy().into_owned(),
        threads: u32::try_from(threads).unwrap_or(u32::MAX),
        started: spinledger_ledger::now(),
        ..Provenance::default()
    }
}
