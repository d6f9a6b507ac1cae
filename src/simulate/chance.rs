//! Seeded chance in exact arithmetic: a stream of numbers → uniform, normal, wandering.
//!
//! Only integers, `+ − × ÷` and `sqrt` are used, which IEEE 754 rounds alike everywhere; no logarithm, sine or
//! power of a system library may enter, or the same seed would give other bytes on another machine.

/// Steps of the simulation in one second; every recurrence below steps at this rate.
pub(super) const RATE_HZ: u32 = 50;
/// Time of one step, s.
pub(super) const STEP_S: f64 = 1.0 / RATE_HZ as f64;

/// SplitMix64 (Steele, Lea, Flood 2014, "Fast splittable pseudorandom number generators", OOPSLA).
#[derive(Clone, Debug)]
pub(super) struct Chance(u64);

impl Chance {
    /// A stream of its own for each `purpose`, so that one source more or less leaves the others as they were.
    pub(super) fn new(seed: u64, purpose: u64) -> Self {
        let mut mixed = Self(seed ^ purpose.wrapping_mul(0xd1b5_4a32_d192_ed03));
        mixed.next();
        Self(mixed.next())
    }

    fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.0 ^ (self.0 >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }

    /// A whole number from 0 up to and without `end`, which is small beside 2⁶⁴.
    pub(super) fn below(&mut self, end: u64) -> u64 {
        self.next() % end
    }

    /// Mean 0, standard deviation 1, close to normal and never beyond ±6: the sum of twelve uniform numbers of
    /// sixteen bits (central limit; each has variance 1/12 of its width squared).
    pub(super) fn normal(&mut self) -> f64 {
        let lanes = |word: u64| (0..4).map(|i| (word >> (16 * i)) & 0xffff).sum::<u64>();
        let sum: u64 = (0..3).map(|_| lanes(self.next())).sum();
        (sum as f64 - 12.0 * 32767.5) / 65536.0
    }
}

/// A value that wanders about zero: first-order autoregression.
#[derive(Clone, Debug)]
pub(super) struct Wander {
    chance: Chance,
    keep: f64,
    push: f64,
    value: f64,
}

impl Wander {
    /// Standard deviation `sd`, integral time scale `time_s` (exact for the sampled series: half a step times
    /// (1 + φ)/(1 − φ)).
    pub(super) fn new(chance: Chance, sd: f64, time_s: f64) -> Self {
        let keep = (2.0 * time_s - STEP_S) / (2.0 * time_s + STEP_S);
        let mut wander = Self { chance, keep, push: sd * (1.0 - keep * keep).sqrt(), value: 0.0 };
        wander.value = sd * wander.chance.normal();
        wander
    }

    /// The next value.
    pub(super) fn step(&mut self) -> f64 {
        self.value = self.keep * self.value + self.push * self.chance.normal();
        self.value
    }
}

/// A first-order lag whose delay of slow changes is exactly `lag_s`: (1 − a)/a steps.
#[derive(Clone, Debug)]
pub(super) struct Lag {
    gain: f64,
    value: f64,
}

impl Lag {
    /// At rest at zero.
    pub(super) fn new(lag_s: f64) -> Self {
        Self { gain: STEP_S / (lag_s + STEP_S), value: 0.0 }
    }

    /// What it gives now.
    #[cfg(test)]
    pub(super) fn value(&self) -> f64 {
        self.value
    }

    /// Takes the input of one step, gives the output.
    pub(super) fn step(&mut self, input: f64) -> f64 {
        self.value += self.gain * (input - self.value);
        self.value
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// First outputs of SplitMix64 from state 1234567: the widely published test vector (from memory).
    #[test]
    fn the_generator_is_splitmix64() {
        let mut chance = Chance(1_234_567);
        let first: Vec<u64> = (0..3).map(|_| chance.next()).collect();
        assert_eq!(first, [6_457_827_717_110_365_317, 3_203_168_211_198_807_973, 9_817_491_932_198_370_423]);
    }

    /// Standard errors at n = 200 000: mean 0.0022, variance 0.0031 (kurtosis of twelve uniforms is 2.9); four of each.
    #[test]
    fn normal_has_mean_0_and_variance_1() {
        let mut chance = Chance::new(7, 7);
        let n = 200_000;
        let (mut sum, mut squares) = (0.0, 0.0);
        for _ in 0..n {
            let x = chance.normal();
            sum += x;
            squares += x * x;
        }
        assert!((sum / f64::from(n)).abs() < 0.009, "mean {}", sum / f64::from(n));
        assert!((squares / f64::from(n) - 1.0).abs() < 0.013, "variance {}", squares / f64::from(n));
    }

    /// A ramp leaves a first-order lag late by exactly its time (any text on linear systems).
    #[test]
    fn a_ramp_comes_out_late_by_the_lag() {
        let mut lag = Lag::new(0.05);
        let last = (0..1000).map(|i| lag.step(f64::from(i) * STEP_S)).last().expect("a thousand steps");
        assert!((999.0 * STEP_S - last - 0.05).abs() < 1e-9);
    }
}
