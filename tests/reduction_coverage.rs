//! The intervals cover as they say, and verdicts are wrong no more often than they say, over many simulated outings.
#![expect(clippy::disallowed_macros, reason = "the figures are for whoever runs the study with --nocapture")]

use crate::reduction_outings::{Course, Day, Step, plan};
use std::sync::atomic::{AtomicUsize, Ordering};
use steadytap::reduction::compare::Verdict;
use steadytap::reduction::probe::dynamic_pressure;
use steadytap::reduction::{Options, air::ISA_DENSITY, reduce};
use steadytap::session::Direction;

const BOTH: [Direction; 2] = [Direction::Out, Direction::Back];

#[derive(Clone, Copy, Debug, PartialEq)]
enum Design {
    Aba,
    Abca,
    Alternating,
    OneWay,
}

/// The change in a simulated outing, as multiples of the smallest change worth knowing.
#[derive(Clone, Copy, Debug, PartialEq)]
enum Change {
    None,
    OneTap(f64),
    AllTaps(f64),
}

fn resolve_cp() -> f64 {
    5.0 / dynamic_pressure(ISA_DENSITY, 100.0)
}

/// Days of one design that differ in passes, wind, gusts, scatter, drift, noise.
fn day(design: Design, change: Change, course: Course, n: usize) -> Day {
    let pick = |of: &[f64], stride: usize| of[n / stride % of.len()];
    let passes = 3 + n % 6;
    let (letters, blocks, each, ways): (Vec<&'static str>, Vec<usize>, usize, &[Direction]) = match design {
        Design::Aba => (vec!["A", "B"], vec![0, 1, 0], passes.div_ceil(2), &BOTH),
        Design::Abca => (vec!["A", "B", "C"], vec![0, 1, 2, 0], passes.div_ceil(2), &BOTH),
        Design::Alternating => (vec!["A", "B"], [0, 1].repeat(passes), 1, &BOTH),
        Design::OneWay => (vec!["A", "B"], vec![0, 1, 0], passes, &BOTH[..1]),
    };
    let taps = 6;
    let x = resolve_cp();
    let of_tap = |i: usize| match change {
        Change::None => 0.0,
        Change::OneTap(by) => {
            if i == 2 {
                by * x
            } else {
                0.0
            }
        }
        Change::AllTaps(by) => {
            if i.is_multiple_of(2) {
                by * x
            } else {
                -by * x
            }
        }
    };
    let scatter = pick(&[0.0005, 0.002, 0.005], 6);
    let own = pick(&[0.0005, 0.001, 0.003, 0.005, 0.007], 18);
    Day {
        taps,
        change: vec![(0..taps).map(of_tap).collect(); letters.len() - 1],
        letters,
        plan: plan(&blocks, each, ways),
        scatter: [scatter, own],
        drift: pick(&[0.0, 0.01, 0.03], 24),
        zero_drift_pa: pick(&[0.0, 4.0], 7),
        course,
        noise_pa: pick(&[0.3, 1.0, 2.5], 5),
        wind_kmh: pick(&[0.0, 6.0, 15.0], 11),
        wind_sd_kmh: 2.0,
        gust_kmh: pick(&[1.0, 4.0], 13),
        heading: pick(&[0.0, 0.01], 3),
        seed: 0x5eed_0000 + 0x10_0000 * design as u64 + n as u64,
    }
}

#[derive(Clone, Copy, Debug, Default)]
struct Tally {
    outings: usize,
    differences: usize,
    without_interval: usize,
    covered: usize,
    /// Outings with a `changed` where nothing changed, and with a `no-change` where more than resolve did.
    falsely_changed: usize,
    falsely_same: usize,
    bent: usize,
    /// Outings that are cautioned of a drift, and those of the wrongly changed ones.
    cautioned: usize,
    wrong_and_cautioned: usize,
    /// Differences by verdict.
    changed: usize,
    same: usize,
    half_width: f64,
}

impl Tally {
    fn add(&mut self, other: &Self) {
        self.outings += other.outings;
        self.differences += other.differences;
        self.without_interval += other.without_interval;
        self.covered += other.covered;
        self.falsely_changed += other.falsely_changed;
        self.falsely_same += other.falsely_same;
        self.changed += other.changed;
        self.bent += other.bent;
        self.cautioned += other.cautioned;
        self.wrong_and_cautioned += other.wrong_and_cautioned;
        self.same += other.same;
        self.half_width += other.half_width;
    }

    fn coverage(&self) -> f64 {
        100.0 * self.covered as f64 / (self.differences - self.without_interval) as f64
    }

    fn share(&self, of: usize) -> f64 {
        100.0 * of as f64 / self.outings as f64
    }

    fn print(&self, what: &str) {
        let known = (self.differences - self.without_interval) as f64;
        println!(
            "{what:<34} {:>5} outings, {:>6} differences: covered {:>6.2} %, half-width {:.5}, changed {:>5.1} %, no change {:>5.1} %; wrong: changed {:>5.2} %, no change {:>5.2} % of outings; bend seen in {:>4.1} %, cautioned {:>4.1} %, wrong and cautioned {:>4.2} %",
            self.outings,
            self.differences,
            self.coverage(),
            self.half_width / known,
            100.0 * self.changed as f64 / known,
            100.0 * self.same as f64 / known,
            self.share(self.falsely_changed),
            self.share(self.falsely_same),
            self.share(self.bent),
            self.share(self.cautioned),
            self.share(self.wrong_and_cautioned)
        );
    }
}

fn judge(day: &Day) -> Tally {
    let reduction = reduce(&[day.outing()], &Options::default()).expect("one session reduces");
    let mut tally = Tally { outings: 1, ..Tally::default() };
    let (mut falsely_changed, mut falsely_same) = (false, false);
    for c in &reduction.comparisons {
        let letter = day.letters.iter().position(|l| *l == c.configuration).expect("a known letter");
        let tap: usize = c.tap["tap-".len()..].parse().expect("taps are numbered");
        let truth = day.change[letter - 1][tap - 1];
        tally.differences += 1;
        let Some(u95) = c.delta.u95 else {
            tally.without_interval += 1;
            continue;
        };
        tally.half_width += u95;
        tally.covered += usize::from((c.delta.value - truth).abs() <= u95);
        tally.changed += usize::from(c.verdict == Verdict::Changed);
        tally.same += usize::from(c.verdict == Verdict::NoChange);
        falsely_changed |= c.verdict == Verdict::Changed && truth == 0.0;
        falsely_same |= c.verdict == Verdict::NoChange && truth.abs() > resolve_cp();
    }
    tally.bent = usize::from(reduction.flags.iter().any(|f| f.contains("drift bends")));
    let cautioned = reduction.flags.iter().any(|f| f.contains("a drift that is not straight"));
    tally.cautioned = usize::from(cautioned);
    tally.wrong_and_cautioned = usize::from(cautioned && falsely_changed);
    tally.falsely_changed = usize::from(falsely_changed);
    tally.falsely_same = usize::from(falsely_same);
    tally
}

/// Two threads, each taking the next outing.
fn study(days: &[Day]) -> Tally {
    let next = AtomicUsize::new(0);
    let work = || {
        let mut tally = Tally::default();
        while let Some(day) = days.get(next.fetch_add(1, Ordering::Relaxed)) {
            tally.add(&judge(day));
        }
        tally
    };
    std::thread::scope(|scope| {
        let other = scope.spawn(work);
        let mut all = work();
        all.add(&other.join().expect("no outing panics"));
        all
    })
}

const DESIGNS: [Design; 4] = [Design::Aba, Design::Abca, Design::Alternating, Design::OneWay];

fn of_design(design: Design, change: Change, course: Course, outings: usize) -> Tally {
    let days: Vec<Day> = (0..outings).map(|n| day(design, change, course, n)).collect();
    let tally = study(&days);
    tally.print(&format!("{design:?}, {change:?}"));
    tally
}

fn of_all(change: Change, outings: usize) -> Tally {
    let mut all = Tally::default();
    for design in DESIGNS {
        all.add(&of_design(design, change, Course::Straight, outings));
    }
    all.print("all");
    all
}

#[test]
fn intervals_cover_and_changed_is_rarely_wrong() {
    let all = of_all(Change::None, 400);
    assert!((93.5..=96.5).contains(&all.coverage()), "{}", all.coverage());
    assert!(all.share(all.falsely_changed) <= 5.0, "{}", all.share(all.falsely_changed));
    // Said at 1 % over the taps of a target.
    assert!(all.share(all.bent) <= 2.0, "{}", all.share(all.bent));
}

/// One tap just above what is worth knowing: outings. All taps and configurations at once: each difference may be called unchanged
/// in 2.5 % of cases (a two-sided 95 % interval inside ±x), and nothing in the rule adds up over them.
#[test]
fn no_change_is_rarely_said_of_a_change_worth_knowing() {
    let one = of_all(Change::OneTap(1.02), 150);
    assert!(one.share(one.falsely_same) <= 5.0, "{}", one.share(one.falsely_same));
    let every = of_all(Change::AllTaps(1.02), 100);
    let share = 100.0 * every.same as f64 / every.differences as f64;
    assert!(share <= 2.5, "{share} % of differences");
}

/// The error of the zeros is common to the passes between them: more passes do not average it, and the interval must know.
#[test]
fn intervals_cover_where_zeros_are_the_largest_error() {
    let days: Vec<Day> = (0..200)
        .map(|n| Day {
            scatter: [0.0002, 0.0002],
            noise_pa: 6.0,
            ..day(Design::Aba, Change::None, Course::Straight, n)
        })
        .collect();
    let tally = study(&days);
    tally.print("zeros noisy");
    assert!((93.0..=98.5).contains(&tally.coverage()), "{}", tally.coverage());
}

/// The baseline both ways, the other one way only: the difference between the ways is known from the baseline.
#[test]
fn a_configuration_driven_one_way_is_compared_with_the_same_way() {
    let one_way = |n: usize| {
        let mut day = day(Design::Aba, Change::None, Course::Straight, n);
        day.plan.retain(|step| *step != Step::Pass(1, Direction::Back));
        Day { heading: 0.02, ..day }
    };
    let days: Vec<Day> = (0..400).map(one_way).collect();
    let tally = study(&days);
    tally.print("B one way");
    assert!((93.0..=97.0).contains(&tally.coverage()), "{}", tally.coverage());
}

/// What the intervals do not know: a drift that is not straight. Alternating holds; blocks do not, and the bend is seen too seldom
/// to save them, which is why a plan in blocks is second best.
#[test]
fn a_bent_drift_is_covered_by_alternating_only() {
    for design in DESIGNS {
        let tally = of_design(design, Change::None, Course::Warming, 100);
        match design {
            Design::Alternating => assert!(tally.coverage() >= 93.5, "{}", tally.coverage()),
            _ => assert!(tally.coverage() < 93.5, "{design:?} now covers: say so in the manual"),
        }
    }
    let strong = |n: usize| Day {
        drift: 0.05,
        scatter: [0.001, 0.001],
        ..day(Design::Alternating, Change::None, Course::Warming, 5 + 6 * n)
    };
    let days: Vec<Day> = (0..60).map(strong).collect();
    let tally = study(&days);
    tally.print("strong bend");
    assert!(tally.share(tally.bent) >= 90.0, "{}", tally.share(tally.bent));
}
