//! Random tests repeat: the seed is fixed, and `PROPTEST_RNG_SEED` and `PROPTEST_CASES` set it and their number.

use proptest::test_runner::{Config, RngSeed};

/// The usual settings of the random tests, with `cases` cases unless the environment says otherwise.
pub fn cases(cases: u32) -> Config {
    // `Config::default` has read the environment already.
    let mut config = Config::default();
    if config.rng_seed == RngSeed::Random {
        config.rng_seed = RngSeed::Fixed(0x5749_5448);
    }
    if std::env::var_os("PROPTEST_CASES").is_none() {
        config.cases = cases;
    }
    // The seed reproduces a failure; no files beside the sources.
    config.failure_persistence = None;
    config
}
