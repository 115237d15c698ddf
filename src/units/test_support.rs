//! What the tests of this folder share.

use proptest::test_runner::{Config, RngAlgorithm, RngSeed};

/// The same `cases` cases in every run, and no file of failures beside the sources.
pub(crate) fn deterministic(cases: u32) -> Config {
    Config {
        cases,
        rng_algorithm: RngAlgorithm::ChaCha,
        rng_seed: RngSeed::Fixed(60062),
        failure_persistence: None,
        ..Config::default()
    }
}
