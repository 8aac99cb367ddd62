//! Random problems placed at a known distance from the border of what is possible.
//!
//! Contract: [`Border::random`] draws a family (ordinary, badly scaled, redundant,
//! without cost, tiny) and a direction (tighter ratings or more load), finds the
//! border by a linear programme, and gives a problem on either side of it, every
//! number an exact `f32`.

use crate::areas::{Area, Chance, ORDINARY, Shape};
use crate::programme::{Direction, Kind, Programme};

/// What a problem is like.
#[derive(Clone, Copy, Debug, PartialEq, Eq)]
pub enum Family {
    /// A small ordinary area.
    Ordinary,
    /// Reactances and costs over four decades.
    BadlyScaled,
    /// Rows stated twice, and sums of rows.
    Redundant,
    /// Next to no cost.
    Costless,
    /// One bus, no line, one actuator.
    Tiny,
}

/// All families.
pub const FAMILIES: [Family; 5] =
    [Family::Ordinary, Family::BadlyScaled, Family::Redundant, Family::Costless, Family::Tiny];

/// A pair of problems, one on each side of the border.
pub struct Border {
    /// Where it came from.
    pub seed: u64,
    /// What it is like.
    pub family: Family,
    /// Distance from the border, pu.
    pub distance: f64,
    /// Possible, by the distance.
    pub possible: Programme,
    /// Impossible, by the distance.
    pub impossible: Programme,
}

impl Border {
    /// Draw a pair; none where the border lies nowhere in reach.
    pub fn random(seed: u64) -> Option<Self> {
        let mut chance = Chance::new(seed ^ 0x5eed_0000);
        let family = FAMILIES[(seed % 5) as usize];
        let distance = chance.decades(1e-4, 0.5);
        let base = draw(&mut chance, seed, family);
        let direction = direction(&mut chance, &base);
        let border = base.farthest(&direction, 0.0)?;
        let beyond = base.farthest(&direction, distance)?;
        if border.abs() > 500.0 || beyond > 500.0 {
            return None;
        }
        let possible = base.moved(&direction, border - distance).rounded();
        let impossible = base.moved(&direction, beyond).rounded();
        // A line whose limits have crossed is no line: ratings are not negative.
        let crossed = impossible.l.iter().zip(&impossible.r).any(|(l, r)| l > r);
        (!crossed).then_some(Self { seed, family, distance, possible, impossible })
    }
}

fn draw(chance: &mut Chance, seed: u64, family: Family) -> Programme {
    let rung = chance.below(4) as u8;
    let small = Shape { buses: (2, 24), ..ORDINARY };
    match family {
        Family::Tiny => tiny(chance),
        Family::BadlyScaled => {
            let shape = Shape { reactance: (1e-4, 1.0), cost: (0.01, 100.0), ..small };
            Area::random(seed, shape).programme(rung)
        }
        Family::Ordinary => Area::random(seed, small).programme(rung),
        Family::Redundant => redundant(chance, Area::random(seed, small).programme(rung)),
        Family::Costless => {
            let mut programme = Area::random(seed, small).programme(rung);
            let least = chance.decades(1e-6, 1e-3);
            programme.q.iter_mut().for_each(|q| *q = least);
            programme.w.iter_mut().for_each(|w| *w = 0.0);
            programme
        }
    }
}

/// One bus with one actuator that meets the load.
fn tiny(chance: &mut Chance) -> Programme {
    let (load, high) = (chance.between(0.1, 9.0), chance.between(0.1, 9.0));
    Programme {
        a: vec![vec![1.0]],
        l: vec![load],
        r: vec![load],
        lo: vec![chance.between(-1.0, 0.1)],
        hi: vec![high],
        q: vec![chance.decades(1e-6, 100.0)],
        x0: vec![chance.between(0.0, high)],
        w: vec![0.0],
        kinds: vec![Kind::Unit],
        n_eq: 1,
    }
}

/// Some rows twice, and the sums of some pairs.
fn redundant(chance: &mut Chance, mut programme: Programme) -> Programme {
    let (first, rows) = (programme.n_eq, programme.rows());
    for i in first..rows {
        match chance.below(3) {
            0 => add_row(&mut programme, i, i, 0.0),
            1 => add_row(&mut programme, i, first + chance.below(rows - first), 1.0),
            _ => {}
        }
    }
    programme
}

fn add_row(programme: &mut Programme, i: usize, k: usize, share: f64) {
    let pairs = programme.a[i].iter().zip(&programme.a[k]);
    let row = pairs.map(|(a, b)| a + share * b).collect();
    programme.a.push(row);
    programme.l.push(programme.l[i] + share * programme.l[k]);
    programme.r.push(programme.r[i] + share * programme.r[k]);
}

/// Tighter line limits, or more of every load.
fn direction(chance: &mut Chance, programme: &Programme) -> Direction {
    let rows = programme.rows();
    let lines = programme.n_eq < rows && chance.below(2) == 0;
    let rate = |i: usize, sign: f64| match i < programme.n_eq {
        true => 0.0,
        false => sign,
    };
    if lines {
        let side = |sign| (0..rows).map(|i| rate(i, sign)).collect();
        return Direction { low: side(1.0), high: side(-1.0) };
    }
    // More load where the first unit stands: the unit's own column.
    let load: Vec<f64> = programme.a.iter().map(|row| row[0]).collect();
    Direction { low: load.clone(), high: load }
}
