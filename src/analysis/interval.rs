//! How sure a proportion is that was found by counting.

use statrs::distribution::{Beta, ContinuousCDF};

/// The exact interval of Clopper and Pearson for a proportion, of which `passed` of `count` trials were found: it holds
/// the true proportion in at least the share `confidence` of all experiments.
///
/// From quantiles of the beta distribution (C. J. Clopper, E. S. Pearson, Biometrika 26, 1934). Without a trial it is 0 to 1.
pub fn clopper_pearson(passed: u64, count: u64, confidence: f64) -> (f64, f64) {
    let tail = 0.5 * (1.0 - confidence);
    let failed = count.saturating_sub(passed);
    // Both shapes are positive where the quantile is asked for, so there always is such a distribution.
    let quantile = |a: f64, b: f64, p: f64| Beta::new(a, b).map_or(f64::NAN, |beta| beta.inverse_cdf(p));
    let (k, rest) = (passed as f64, failed as f64);
    let low = if passed == 0 { 0.0 } else { quantile(k, rest + 1.0, tail) };
    let high = if failed == 0 { 1.0 } else { quantile(k + 1.0, rest, 1.0 - tail) };
    (low, high)
}

#[cfg(test)]
mod tests {
    use super::*;

    // Source: scipy 1.17, scipy.stats.binomtest(k, n).proportion_ci(0.95, "exact").
    #[test]
    fn the_interval_is_that_of_scipy() {
        for (passed, count, low, high) in [
            (0, 10, 0.0, 0.308_497_107_818_762_94),
            (7, 10, 0.347_547_149_939_992_1, 0.933_260_488_822_265_5),
            (950, 1000, 0.934_609_512_084_506_4, 0.962_664_602_395_339_4),
            (8192, 8192, 0.999_549_798_703_291_3, 1.0),
        ] {
            let found = clopper_pearson(passed, count, 0.95);
            assert!((found.0 - low).abs() < 1e-10 && (found.1 - high).abs() < 1e-10, "{passed}/{count}: {found:?}");
        }
    }

    // The rule of three: no failure among n leaves a failure rate of about 3/n at 95 % on one side (3.7/n on two).
    #[test]
    fn no_failure_is_no_proof_of_none() {
        let (low, _) = clopper_pearson(1000, 1000, 0.9);
        assert!((1.0 - low - 3.0 / 1000.0).abs() < 2e-5);
    }
}
