//! In the workshop: is every channel alive, zeroed, calibrated, free of leaks, fast enough?
//!
//! The answer stands large, its first reason and remedy below it, then every channel raw and converted, then the ports. The three tools
//! (calibration, leak, hose) are boxes over the lower part; what they measure is in `reduction::workshop`.

use super::canvas::Canvas;
use super::digits::{self, Size};
use super::figures::Figures;
use super::text::folded;
use super::theme::Role;
use super::{Face, View, below, keys};
use crate::config::Air;
use crate::reduction::air::density;
use crate::reduction::workshop::{self, Calibration, Decay, LEAK_ALLOWED, Point, StepResponse};
use crate::units::{PRESSURES, Quantity, STANDARD_GRAVITY, StreamTime, Unit};
use ratatui::layout::Rect;

/// Where the eye is in this place.
#[derive(Clone, Debug, Default, PartialEq, Eq)]
pub struct BenchFace {
    /// The marked channel.
    pub channel: usize,
}

/// What the workshop sees of the instrument; made only while somebody looks.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Bench {
    /// Every channel in rig order.
    pub rows: Vec<BenchRow>,
    /// The marked channel's newest samples: s, raw, value less its zero.
    pub fine: Vec<[f64; 3]>,
    /// The air as stated, for a water column.
    pub air: Option<Air>,
    /// Its last two minutes by quarter seconds: s, value less its zero.
    pub coarse: Vec<(f64, f64)>,
}

/// One channel.
#[derive(Clone, Debug, PartialEq)]
pub struct BenchRow {
    /// Channel.
    pub channel: String,
    /// Tap that it sits on; empty for none.
    pub tap: String,
    /// Port and field that it comes from.
    pub from: String,
    /// The unit of its figures in the rig file, which a reference is given in.
    pub unit: String,
    /// What it measures.
    pub quantity: Quantity,
    /// The field as it came.
    pub raw: Option<f64>,
    /// Newest value in the unit used inside, not zeroed.
    pub value: Option<f64>,
    /// Samples a second.
    pub rate_per_s: f64,
    /// Standard deviation over two seconds, and at the last zero.
    pub noise: [Option<f64>; 2],
    /// The last zero.
    pub zero: Option<f64>,
    /// Lag of its hose and sensor by the rig, s.
    pub lag_s: f64,
    /// At an end of its range, silent, or standing still.
    pub saturated: bool,
    /// Second.
    pub stale: bool,
    /// Third.
    pub stuck: bool,
}

/// A calibration as it grows.
#[derive(Clone, Debug, Default, PartialEq)]
pub struct Calibrating {
    /// Points so far.
    pub points: Vec<Point>,
    /// The reference that is being typed.
    pub text: String,
    /// A reference that waits for a steady average, and since when.
    pub pending: Option<(f64, StreamTime)>,
    /// What was wrong, or what was done.
    pub told: Option<String>,
}

/// Time that a point is averaged over, s.
const POINT_S: f64 = 3.0;
/// Samples that make an average.
const FEWEST: usize = 20;
/// A leak test tells nothing before, s.
const LEAK_LEAST_S: f64 = 5.0;
/// Trace in which a step is looked for, s.
const STEP_S: f64 = 4.0;
/// Above this the car moves, km/h.
const AT_REST_KMH: f64 = 2.0;
/// Noise beyond its usual that is worth a word.
const NOISY: f64 = 3.0;

impl Calibrating {
    /// The average of the last three seconds, if it lies after the reference was given and stands still.
    fn average(bench: &Bench, since_s: f64) -> Option<f64> {
        let last = bench.fine.last()?[0];
        let recent: Vec<f64> = bench.fine.iter().filter(|s| s[0] > last - POINT_S).map(|s| s[1]).collect();
        if last - since_s < POINT_S || recent.len() < FEWEST || recent.iter().any(|x| !x.is_finite()) {
            return None;
        }
        let mean = |part: &[f64]| part.iter().sum::<f64>() / part.len() as f64;
        let half = recent.len() / 2;
        let (a, b) = (mean(&recent[..half]), mean(&recent[half..]));
        let sd = (recent.iter().map(|x| (x - mean(&recent)).powi(2)).sum::<f64>() / recent.len() as f64).sqrt();
        // Halves that differ by more than their own scatter allows are still moving.
        let allowed = 4.0 * sd * (2.0 / half as f64).sqrt() + 1e-9 * a.abs();
        ((a - b).abs() <= allowed.max(0.05 * sd)).then(|| mean(&recent))
    }

    /// What was typed, in a channel's unit: a figure in that unit, or millimetres of a water column with `mm` behind it.
    pub fn typed(&self, unit: &str, air: Option<&Air>) -> Option<f64> {
        let text = self.text.trim();
        let figure = |text: &str| text.trim().parse::<f64>().ok().filter(|x| x.is_finite());
        let Some(height) = text.strip_suffix("mm") else { return figure(text) };
        let air = air.copied().unwrap_or(Air::STANDARD);
        let pa = workshop::water_column(figure(height)?, air.temperature_c, density(&air), STANDARD_GRAVITY);
        Unit::find(PRESSURES, unit).map(|unit| unit.from_inside(pa))
    }

    /// A pending point is taken once it stands still.
    pub fn look(&mut self, bench: &Bench) {
        let Some((reference, since)) = self.pending else { return };
        if let Some(raw) = Self::average(bench, since.seconds()) {
            self.points.push(Point { raw, reference });
            (self.pending, self.told) = (None, None);
        }
    }

    /// The curve through the points.
    pub fn fit(&self) -> Option<Calibration> {
        workshop::calibrate(&self.points)
    }
}

/// The decay since a moment, once there is enough of it.
fn decay(bench: &Bench, since: StreamTime) -> Option<Decay> {
    let trace: Vec<(f64, f64)> = bench.coarse.iter().copied().filter(|(t, _)| *t > since.seconds()).collect();
    let long = trace.last()?.0 - trace.first()?.0 >= LEAK_LEAST_S;
    workshop::decay(&trace).filter(|_| long)
}

/// A step in the last seconds.
pub(super) fn step(bench: &Bench) -> Option<StepResponse> {
    let last = bench.fine.last()?[0];
    let trace: Vec<(f64, f64)> = bench.fine.iter().filter(|s| s[0] > last - STEP_S).map(|s| (s[0], s[2])).collect();
    workshop::step_response(&trace)
}

/// Draws the place.
pub(super) fn draw(view: &View, face: &Face, canvas: &mut Canvas) {
    let area = canvas.area();
    canvas.heading(&format!("BENCH  {}", view.title), &view.journal.file);
    keys::draw_line(canvas, face, area.bottom() - 1);
    let empty = Bench::default();
    let bench = view.bench.as_ref().unwrap_or(&empty);
    let reasons = reasons(view, bench);
    let (word, role) = if reasons.is_empty() { ("READY", Role::Held) } else { ("NOT READY", Role::Off) };
    digits::draw(canvas, Rect::new(area.x + 2, area.y + 1, area.width - 3, 4), word, (Size::Large, false), role);
    let said =
        reasons.first().cloned().unwrap_or_else(|| "every channel talks, is zeroed and as quiet as usual".to_string());
    let more = if reasons.len() > 1 { format!(" (and {} more)", reasons.len() - 1) } else { String::new() };
    let mut y = area.y + 5;
    for line in folded(&format!("{said}{more}"), usize::from(area.width) - 4).into_iter().take(2) {
        canvas.text((area.x + 2, y), area.width - 3, &line, Role::Base);
        y += 1;
    }
    let ports = u16::try_from(view.ports.len()).unwrap_or(u16::MAX).min(4);
    let room = Rect::new(area.x, y, area.width, (area.bottom() - 1).saturating_sub(y + ports));
    draw_channels(view, bench, face, (canvas, room));
    below::draw_ports(view, canvas, Rect { y: room.bottom(), height: ports, ..room });
}

/// Why it is not ready, the first matter first, each with what to do.
fn reasons(view: &View, bench: &Bench) -> Vec<String> {
    let mut all: Vec<String> = Vec::new();
    all.extend(view.journal.trouble.iter().map(|t| format!("disk: {t}")));
    for port in &view.ports {
        if let Some(words) = below::port_trouble(port) {
            all.push(format!("port {}: {words}", port.name));
        }
    }
    if bench.rows.is_empty() {
        all.push("nothing came yet: plug the ports in".to_string());
    }
    if let Some(kmh) = view.window.speed_kmh.filter(|v| *v > AT_REST_KMH) {
        all.push(format!("the car moves at {kmh:.0} km/h: this place is for a car at rest"));
        return all;
    }
    for row in &bench.rows {
        // A receiver knows no course while it stands.
        if row.stale && row.quantity == Quantity::Track {
            continue;
        }
        if row.stale {
            all.push(format!("{} is silent: look at {} and its wiring", row.channel, row.from));
        } else if row.saturated {
            all.push(format!("{} is at an end of its range: take the pressure off, or a wider sensor", row.channel));
        } else if row.stuck {
            all.push(format!("{} gives one figure over and over: look at the sensor and its wiring", row.channel));
        } else if let [Some(now), Some(usual)] = row.noise
            && usual > 0.0
            && now > NOISY * usual
        {
            let times = now / usual;
            all.push(format!(
                "{} is {times:.0} times as noisy as at its zero: wind on the hose, or a loose wire",
                row.channel
            ));
        }
    }
    if view.zero_age_s.is_none() {
        all.push("never zeroed: press z with the car at rest, hoses on, out of the wind".to_string());
    }
    all
}

fn draw_channels(view: &View, bench: &Bench, face: &Face, (canvas, area): (&mut Canvas, Rect)) {
    if area.height < 2 {
        return;
    }
    let wide = area.width >= 100;
    let head = if wide {
        format!(
            "{:<11}{:<15}{:<14}{:>12}{:>11} {:<6}{:>8}{:>8}{:>9}",
            "channel", "tap", "from", "raw", "value", "", "zero", "noise", "/s"
        )
    } else {
        format!(
            "{:<9}{:<12}{:>11}{:>10} {:<5}{:>8}{:>7}{:>7}",
            "channel", "tap", "raw", "value", "", "zero", "noise", "/s"
        )
    };
    canvas.text((area.x + 2, area.y), area.width - 3, &head, Role::Quiet);
    let rows = usize::from(area.height) - 1;
    let marked = face.bench.channel.min(bench.rows.len().saturating_sub(1));
    let first = (marked + 1).saturating_sub(rows);
    for (y, (i, row)) in (area.y + 1..area.bottom()).zip(bench.rows.iter().enumerate().skip(first)) {
        let sign = if i == marked { canvas.sign('►', '>') } else { ' ' };
        let role = if i == marked { Role::Held } else { Role::Base };
        canvas.put((area.x, y), sign, role);
        let figures = Figures::of(row.quantity, &view.show);
        let unit = figures.unit_or(&row.unit);
        let raw = row.raw.map_or("—".to_string(), shortest);
        let rate = format!("{:.1}", row.rate_per_s.min(9999.9));
        let (value, zero) = (figures.signed(row.value), row.zero.map_or("—".to_string(), |z| figures.short(z)));
        let noise = figures.spread(row.noise[0]);
        let text = if wide {
            format!(
                "{:<11}{:<15}{:<14}{raw:>12}{value:>11} {:<6}{zero:>8}{noise:>8}{rate:>9}",
                cut(&row.channel, 10),
                cut(&row.tap, 14),
                cut(&row.from, 13),
                cut(unit, 5)
            )
        } else {
            format!(
                "{:<9}{:<12}{raw:>11}{value:>10} {:<5}{zero:>8}{noise:>7}{rate:>7}",
                cut(&row.channel, 8),
                cut(&row.tap, 11),
                cut(unit, 5)
            )
        };
        canvas.text((area.x + 2, y), area.width - 3, &text, role);
        let flag = [(row.stale, " STALE "), (row.saturated, " SAT "), (row.stuck, " STUCK ")];
        if let Some((_, word)) = flag.into_iter().find(|(is, _)| *is) {
            canvas.text_right((area.right() - 1, y), 7, word, Role::Trouble);
        }
    }
}

fn cut(text: &str, most: usize) -> String {
    text.chars().take(most).collect()
}

/// A figure in at most ten characters.
fn shortest(x: f64) -> String {
    let plain = format!("{x}");
    if plain.len() <= 10 { plain } else { format!("{x:.4e}") }
}

// ---------------------------------------------------------------- the tools

fn marked<'v>(view: &'v View, face: &Face) -> Option<(&'v Bench, &'v BenchRow)> {
    let bench = view.bench.as_ref()?;
    bench.rows.get(face.bench.channel.min(bench.rows.len().saturating_sub(1))).map(|row| (bench, row))
}

/// Lines of the calibration box.
pub(super) fn calibration_lines(view: &View, face: &Face, c: &Calibrating) -> Vec<(String, Role)> {
    let Some((bench, row)) = marked(view, face) else { return Vec::new() };
    let raw = bench.fine.last().map_or("—".to_string(), |s| shortest(s[1]));
    let mut lines = vec![
        (
            format!(
                "give a steady reference to {} and type what it is, in {}; 35.2mm is a water column",
                row.channel, row.unit
            ),
            Role::Base,
        ),
        (format!("raw {raw}   reference > {}", c.text), Role::Strong),
    ];
    match (&c.pending, &c.told) {
        (Some((reference, _)), _) => {
            lines.push((format!("averaging at {reference} {}: hold still", row.unit), Role::Steady))
        }
        (None, Some(told)) => lines.push((told.clone(), Role::Off)),
        (None, None) => lines.push((String::new(), Role::Base)),
    }
    let fit = c.fit();
    for point in c.points.iter().rev().take(5).rev() {
        let off = fit.as_ref().map_or(String::new(), |f| format!("  off by {:+.4}", point.reference - f.at(point.raw)));
        lines.push((format!("{:>12.4} raw → {:>12.4} {}{off}", point.raw, point.reference, row.unit), Role::Base));
    }
    match fit {
        None => lines.push(("two points make a line; three or more tell how good it is".to_string(), Role::Quiet)),
        Some(fit) => lines.extend(fit_lines(&fit, &row.unit)),
    }
    lines
}

fn fit_lines(fit: &Calibration, unit: &str) -> Vec<(String, Role)> {
    let kind = if fit.coefficients.len() == 3 { "curve (its bend is significant)" } else { "straight line" };
    let middle = f64::midpoint(fit.range[0], fit.range[1]);
    let half = |raw: f64| fit.prediction_u95(raw).map_or("?".to_string(), |u| format!("{u:.3}"));
    let sure = match fit.residual_sd {
        Some(sd) => format!(
            "residuals {sd:.4} {unit}; a reading is good to ± {} {unit} in the middle, ± {} at the end (95 %)",
            half(middle),
            half(fit.range[1])
        ),
        None => "no degrees of freedom: one point more tells how good it is".to_string(),
    };
    let terms: Vec<String> = fit.coefficients.iter().map(|c| format!("{c:.6}")).collect();
    vec![(format!("{kind}: {}", terms.join(", ")), Role::Strong), (sure, Role::Base)]
}

/// Lines of the leak box.
pub(super) fn leak_lines(view: &View, face: &Face, since: Option<StreamTime>) -> Vec<(String, Role)> {
    let Some((bench, row)) = marked(view, face) else { return Vec::new() };
    let figures = Figures::of(row.quantity, &view.show);
    let now = bench.coarse.last().map(|p| p.1);
    let mut lines = vec![
        (format!("{}: press its hose at the tap, close it there, then Enter", row.channel), Role::Base),
        (format!("{} {}", figures.signed(now), figures.unit()), Role::Strong),
    ];
    let Some(since) = since else { return lines };
    let held = view.now.since(since) as f64 / 1e6;
    let Some(decay) = decay(bench, since) else {
        let words =
            format!("held for {held:.0} s; {LEAK_LEAST_S:.0} s or more tell, and the pressure must not be nothing");
        lines.push((words, Role::Steady));
        return lines;
    };
    let falsifies = decay.falsifies(row.lag_s);
    let slow = decay.rate_per_s <= decay.rate_u95;
    let rate = if slow {
        format!(
            "no leak seen in {held:.0} s: it loses less than {:.2} % a second",
            100.0 * (decay.rate_per_s + decay.rate_u95)
        )
    } else {
        let (tau, rate) = (1.0 / decay.rate_per_s, 100.0 * decay.rate_per_s);
        format!("loses {rate:.2} ± {:.2} % a second: time constant {tau:.1} s", 100.0 * decay.rate_u95)
    };
    lines.push((rate, Role::Base));
    let (word, role) = if falsifies <= LEAK_ALLOWED { ("PASS", Role::Kept) } else { ("FAIL", Role::Trouble) };
    let words = format!(
        " {word}: with a lag of {:.3} s it reads {:.2} % low at most; {:.1} % is allowed ",
        row.lag_s,
        100.0 * falsifies,
        100.0 * LEAK_ALLOWED
    );
    lines.push((words, role));
    lines
}

/// Lines of the hose box.
pub(super) fn step_lines(view: &View, face: &Face, found: Option<StepResponse>) -> Vec<(String, Role)> {
    let Some((bench, row)) = marked(view, face) else { return Vec::new() };
    let figures = Figures::of(row.quantity, &view.show);
    let now = bench.fine.last().map(|s| s[2]);
    let mut lines = vec![
        (format!("{}: put a pressure on its tap and let it go at once", row.channel), Role::Base),
        (format!("{} {}", figures.signed(now), figures.unit()), Role::Strong),
    ];
    match found {
        None => lines.push(("no step seen in the last four seconds".to_string(), Role::Quiet)),
        Some(s) => {
            let measured = if s.lag_s < s.resolution_s {
                format!("measured: faster than the samples, {:.0} ms apart", 1000.0 * s.resolution_s)
            } else {
                format!("measured: {:.0} ms, samples {:.0} ms apart", 1000.0 * s.lag_s, 1000.0 * s.resolution_s)
            };
            lines.push((measured, Role::Strong));
            let words = format!("the rig says {:.0} ms (`lag_s`, or computed from its tube)", 1000.0 * row.lag_s);
            lines.push((words, Role::Base));
            if (s.lag_s - row.lag_s).abs() > (0.5 * row.lag_s).max(s.resolution_s) {
                lines.push((
                    "they differ: a kink, water, another tube, or a rig file to put right".to_string(),
                    Role::Off,
                ));
            }
        }
    }
    lines
}
