//! The car from its right side, for whoever draws it: places of the outline, metres from the front axle and above the road.

use crate::config::{Car, Tap};

/// Radius of a wheel, m: for the eye only, no file says it.
pub const WHEEL_M: f64 = 0.33;

/// A closed ring to be drawn about the car, (x, z) of each corner in m.
#[derive(Clone, Debug, PartialEq)]
pub struct Outline {
    /// Its corners in order.
    pub ring: Vec<[f64; 2]>,
    /// It joins the taps of the contour; else it goes round taps and wheels and is not the body.
    pub is_body: bool,
}

/// The contour where the car has one, else the smallest convex ring round all taps and the floor between the axles.
pub fn outline(car: Option<&Car>, taps: &[&Tap]) -> Outline {
    let place = |t: &Tap| [t.at[0], t.at[2]];
    let names = car.map_or(&[][..], |c| &c.contour);
    let contour: Vec<_> = names.iter().filter_map(|name| taps.iter().find(|t| &t.name == name)).collect();
    if !contour.is_empty() {
        return Outline { ring: contour.into_iter().map(|t| place(t)).collect(), is_body: true };
    }
    let wheelbase_m = car.map_or(0.0, |c| c.wheelbase_m);
    let floor = [[-WHEEL_M, WHEEL_M], [wheelbase_m + WHEEL_M, WHEEL_M]];
    Outline { ring: hull(taps.iter().map(|t| place(t)).chain(floor).collect()), is_body: false }
}

/// The smallest convex ring round points. *Method* Andrew's monotone chain, Inf. Process. Lett. 9, 1979, 216.
fn hull(mut points: Vec<[f64; 2]>) -> Vec<[f64; 2]> {
    points.sort_by(|a, b| a[0].total_cmp(&b[0]).then(a[1].total_cmp(&b[1])));
    let turn = |a: [f64; 2], b: [f64; 2], c: [f64; 2]| (b[0] - a[0]) * (c[1] - a[1]) - (b[1] - a[1]) * (c[0] - a[0]);
    let chain = |points: &mut dyn Iterator<Item = [f64; 2]>| {
        let mut ring: Vec<[f64; 2]> = Vec::new();
        for p in points {
            while ring.len() > 1 && turn(ring[ring.len() - 2], ring[ring.len() - 1], p) <= 0.0 {
                ring.pop();
            }
            ring.push(p);
        }
        ring.pop();
        ring
    };
    let mut ring = chain(&mut points.iter().copied());
    ring.extend(chain(&mut points.iter().rev().copied()));
    ring
}
