//! The standard error of a dwell respects that neighbours are alike: against a reference library on given series, and
//! against the exact variance of the mean of an AR(1) process.

use steadytap::hold::statistics::{Accumulator, Place, lag_one_autocorrelation, standard_error};

/// Means of 20 of an AR(1) series, phi 0.8, 2000 samples, simulated (numpy PCG64 seed 20240117, sd 5, mean -150).
const BINS_08: [f64; 100] = [
    -150.167798250,
    -147.217762250,
    -150.371078200,
    -146.826868350,
    -143.780355600,
    -145.364679350,
    -153.228068650,
    -151.547929500,
    -154.085286550,
    -149.537782900,
    -147.098769350,
    -156.702531850,
    -149.124621000,
    -150.854987450,
    -151.624461800,
    -151.666636400,
    -147.929200650,
    -145.933950500,
    -148.743561550,
    -147.100160750,
    -146.114054600,
    -148.920365750,
    -147.599098050,
    -146.025727450,
    -153.230003300,
    -148.914100150,
    -150.360016950,
    -147.847508400,
    -148.786831800,
    -145.681115100,
    -154.062669900,
    -151.769980000,
    -145.265438400,
    -151.612230900,
    -151.187270400,
    -148.154258000,
    -153.798385750,
    -151.126579050,
    -148.301603900,
    -155.651497500,
    -154.623893100,
    -148.781999100,
    -147.983447600,
    -153.856568300,
    -155.154669900,
    -151.705911800,
    -155.252494950,
    -148.102977700,
    -154.257468700,
    -150.625870000,
    -147.356549050,
    -147.423784550,
    -144.363831650,
    -150.288170900,
    -149.624966800,
    -149.737789050,
    -146.137894250,
    -148.348263000,
    -147.832125250,
    -155.617662300,
    -151.370681450,
    -147.067938250,
    -154.948922700,
    -149.087247350,
    -152.123478000,
    -152.904266450,
    -152.050227750,
    -151.973164400,
    -144.531312250,
    -148.615839400,
    -155.174230700,
    -146.720147650,
    -146.255627550,
    -147.105884550,
    -151.201544200,
    -148.982742100,
    -154.150287600,
    -149.167640900,
    -143.324237750,
    -153.676182700,
    -148.816792950,
    -148.184965600,
    -145.969297650,
    -150.411286300,
    -152.955664150,
    -151.939304650,
    -152.477643100,
    -154.417184700,
    -149.242822550,
    -149.298014100,
    -146.251423700,
    -151.793008650,
    -148.888682750,
    -156.729161050,
    -151.227490400,
    -148.674753250,
    -151.810195400,
    -150.705918050,
    -145.336058500,
    -148.967734600,
];

/// Means of 30 of an AR(1) series, phi 0.95, 1500 samples, simulated (numpy PCG64 seed 20240118, sd 8, mean -310).
const BINS_095: [f64; 50] = [
    -308.899876800,
    -302.775597133,
    -311.388625367,
    -299.523347367,
    -302.805404900,
    -326.352977667,
    -307.875395700,
    -304.431932967,
    -314.096498667,
    -312.186953433,
    -309.180796200,
    -313.827625167,
    -317.549502600,
    -308.774472267,
    -322.167978900,
    -312.016264333,
    -304.379167900,
    -312.749283367,
    -309.146509900,
    -308.409435633,
    -308.052668167,
    -316.192239133,
    -311.864902033,
    -306.395437933,
    -310.551954800,
    -307.165252067,
    -301.097804233,
    -300.066731400,
    -305.961560133,
    -301.862475933,
    -304.103223600,
    -307.505076767,
    -304.627581400,
    -311.473601933,
    -312.416415767,
    -313.743993367,
    -321.583123967,
    -313.609264033,
    -314.652826333,
    -303.907490100,
    -309.740039867,
    -308.305454300,
    -305.455119667,
    -311.035459833,
    -306.528384867,
    -302.773331267,
    -306.633113100,
    -305.400163700,
    -311.549285667,
    -310.578468533,
];

#[track_caller]
fn near(got: f64, expected: f64, relative: f64) {
    assert!((got - expected).abs() <= relative * expected.abs(), "{got} against {expected}");
}

/// Expected values: statsmodels 0.15.0 and numpy 2.4.6, the lag-1 formula on non-overlapping bin means.
#[test]
fn the_standard_error_of_bin_means_is_the_reference_librarys() {
    near(lag_one_autocorrelation(&BINS_08).unwrap(), 0.045822517029809766, 1e-6);
    near(standard_error(&BINS_08).unwrap(), 0.3284792393479638, 1e-7);
    near(lag_one_autocorrelation(&BINS_095).unwrap(), 0.174486674508693, 1e-6);
    near(standard_error(&BINS_095).unwrap(), 0.9432997366832726, 1e-7);
}

/// Standard normal deviates by Box and Muller from a 64-bit multiplicative congruential generator.
struct Normal(u64);

impl Normal {
    fn uniform(&mut self) -> f64 {
        self.0 = self.0.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1_442_695_040_888_963_407);
        ((self.0 >> 11) as f64 + 0.5) / (1u64 << 53) as f64
    }

    fn next(&mut self) -> f64 {
        let (u, v) = (self.uniform(), self.uniform());
        (-2.0 * u.ln()).sqrt() * (std::f64::consts::TAU * v).cos()
    }
}

/// The exact standard error of the mean of a stationary AR(1) process is elementary (Priestley, "Spectral Analysis and Time
/// Series", 1981, from memory): phi 0.8, n 2000, sd 5 gives 0.335037311355.
#[test]
fn over_many_series_the_standard_error_is_that_of_the_process() {
    const SERIES: usize = 400;
    let (phi, n, sd, exact): (f64, usize, f64, f64) = (0.8, 2000, 5.0, 0.335_037_311_355);
    let mut normal = Normal(1);
    let (mut means, mut variances, mut naive) = (0.0, 0.0, 0.0);
    for _ in 0..SERIES {
        let mut x = sd * normal.next();
        let mut accumulator = Accumulator::new(false, 100);
        for i in 0..n {
            accumulator.push(Place { us: i as i64 * 10_000, bin: i / 20 }, x - 150.0, false);
            x = phi * x + sd * (1.0 - phi * phi).sqrt() * normal.next();
        }
        let s = accumulator.finish().expect("there are samples");
        means += (s.mean + 150.0).powi(2);
        variances += s.se.expect("there are bins").powi(2);
        naive += s.sd.expect("there are samples").powi(2) / n as f64;
    }
    let root = |sum: f64| (sum / SERIES as f64).sqrt();
    // 400 series know a root mean square to 3.5 %.
    near(root(means), exact, 0.12);
    near(root(variances), exact, 0.12);
    assert!(
        root(naive) < exact / 2.5,
        "as if independent, the error is thought three times too small: {}",
        root(naive)
    );
}

#[test]
fn an_error_is_never_thought_larger_than_the_scatter_nor_smaller_than_of_independent_bins() {
    // One slow wave over all bins: neighbours are so alike that they count as a single value.
    let wave: Vec<f64> = (1..=20).map(|t| (std::f64::consts::TAU * f64::from(t) / 21.0).sin()).collect();
    let sd = |x: &[f64]| {
        let mean = x.iter().sum::<f64>() / x.len() as f64;
        (x.iter().map(|v| (v - mean).powi(2)).sum::<f64>() / (x.len() - 1) as f64).sqrt()
    };
    near(standard_error(&wave).unwrap(), sd(&wave), 1e-12);
    // Neighbours on opposite sides are no reason to trust the mean more.
    let zigzag: Vec<f64> = (0..20).map(|t| f64::from(t % 2)).collect();
    near(standard_error(&zigzag).unwrap(), sd(&zigzag) / 20f64.sqrt(), 1e-12);
    assert_eq!(standard_error(&[1.0, 2.0]), None);
}
