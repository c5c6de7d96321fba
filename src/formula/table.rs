//! Measured data: values between points.

/// How the values run between the points.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Through {
    /// Cubic pieces with a continuous slope, monotone wherever the data are: F. N. Fritsch and R. E. Carlson, SIAM J.
    /// Numer. Anal. 17 (1980) 238-246.
    Smooth,
    /// Straight pieces.
    Straight,
}

/// A function given by points.
///
/// Beyond its ends it does not go on as measured: it levels off, once continuously differentiable, so that an iteration
/// may pass there. No result may rest on that; whoever uses a table checks where its argument ends up.
///
/// ```
/// use spanwise::formula::table::{Table, Through};
/// let table = Table::new(&[0.0, 1.0, 3.0], &[1.0, 2.0, 8.0], Through::Straight).expect("ascending points");
/// assert_eq!(table.value(0, 2.0), 5.0);
/// assert_eq!(table.value(1, 2.0), 3.0);
/// ```
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    points: Vec<f64>,
    /// Coefficients of the powers of (x - left point), one row for each piece.
    pieces: Vec<[f64; 4]>,
    through: Through,
    /// Length over which the values level off beyond the ends.
    reach: [f64; 2],
    /// Largest value, in size.
    size: f64,
}

impl Table {
    /// The function through (x, y).
    ///
    /// `None` unless there are at least two points with finite values, and x ascends.
    pub fn new(x: &[f64], y: &[f64], through: Through) -> Option<Self> {
        let ascends = x.windows(2).all(|p| p[0] < p[1] && (p[1] - p[0]).is_finite());
        let finite = x.iter().chain(y).all(|v| v.is_finite());
        if x.len() < 2 || x.len() != y.len() || !ascends || !finite {
            return None;
        }
        let lengths: Vec<f64> = x.windows(2).map(|p| p[1] - p[0]).collect();
        let secants: Vec<f64> = y.windows(2).zip(&lengths).map(|(p, h)| (p[1] - p[0]) / h).collect();
        let slopes = match through {
            Through::Smooth => slopes(&lengths, &secants),
            Through::Straight => Vec::new(),
        };
        let pieces: Vec<[f64; 4]> = (0..lengths.len())
            .map(|k| {
                let (h, d) = (lengths[k], secants[k]);
                match slopes.get(k..k + 2) {
                    Some(&[a, b]) => [y[k], a, (3.0 * d - 2.0 * a - b) / h, (a + b - 2.0 * d) / (h * h)],
                    _ => [y[k], d, 0.0, 0.0],
                }
            })
            .collect();
        if pieces.iter().flatten().any(|c| !c.is_finite()) {
            return None;
        }
        let size = y.iter().fold(0.0f64, |s, v| s.max(v.abs()));
        let mut table = Self { points: x.to_vec(), pieces, through, reach: [0.0; 2], size };
        let [low, high] = table.range();
        table.reach = [low, high].map(|end| {
            let (value, slope) = (table.inside(0, end), table.inside(1, end));
            // At most half of the end's value is given up or gained, so that no sign changes.
            let half = 0.5 * (value / slope).abs();
            let quarter = 0.25 * (high - low);
            if half > 0.0 { half.min(quarter) } else { quarter }
        });
        Some(table)
    }

    /// Where it is measured: first and last point.
    pub fn range(&self) -> [f64; 2] {
        [self.points[0], self.points[self.points.len() - 1]]
    }

    /// The points.
    pub fn points(&self) -> &[f64] {
        &self.points
    }

    /// How it runs between them.
    pub fn through(&self) -> Through {
        self.through
    }

    /// Highest derivative that is continuous.
    pub fn smoothness(&self) -> u8 {
        match self.through {
            Through::Smooth => 1,
            Through::Straight => 0,
        }
    }

    /// Highest derivative that is not zero everywhere.
    pub fn degree(&self) -> u8 {
        match self.through {
            Through::Smooth => 3,
            Through::Straight => 1,
        }
    }

    /// Coefficients of the powers of (x - left point) of the derivative `order` on a piece.
    pub fn coefficients(&self, order: u8, piece: usize) -> [f64; 4] {
        let [a, b, c, d] = self.pieces[piece];
        match order {
            0 => [a, b, c, d],
            1 => [b, 2.0 * c, 3.0 * d, 0.0],
            2 => [2.0 * c, 6.0 * d, 0.0, 0.0],
            3 => [6.0 * d, 0.0, 0.0, 0.0],
            _ => [0.0; 4],
        }
    }

    /// The derivative `order` at x: by the piece to the right where x is a point.
    pub fn value(&self, order: u8, x: f64) -> f64 {
        let [low, high] = self.range();
        match x {
            _ if x < low => self.beyond(order, low, x, self.reach[0]),
            _ if x > high => self.beyond(order, high, x, self.reach[1]),
            _ if x.is_nan() => f64::NAN,
            _ => self.inside(order, x),
        }
    }

    /// Bound for the rounding of [`Table::value`] near x, for an argument right to `error`.
    pub fn rounding(&self, order: u8, x: f64, error: f64) -> f64 {
        let ulp = 8.0 * f64::EPSILON;
        let length = (self.points[1] - self.points[0]).abs();
        let own = match order {
            0 => self.size,
            _ => self.value(order, x).abs() + self.size / length.powi(i32::from(order)) * f64::EPSILON,
        };
        let steep = [x - error, x, x + error].iter().map(|x| self.value(order + 1, *x).abs()).fold(0.0, f64::max);
        let moved = if error == 0.0 { 0.0 } else { error * steep };
        // From one piece into the next a derivative may step.
        let stepped = if order > self.smoothness() && error > 0.0 {
            (self.value(order, x - error) - self.value(order, x + error)).abs()
        } else {
            0.0
        };
        ulp * own + moved + stepped
    }

    fn inside(&self, order: u8, x: f64) -> f64 {
        let piece = self.points.partition_point(|p| *p <= x).clamp(1, self.pieces.len()) - 1;
        let [a, b, c, d] = self.coefficients(order, piece);
        let t = x - self.points[piece];
        a + t * (b + t * (c + t * d))
    }

    /// f(end) + f'(end) t/(1 + |t|/reach), t = x - end.
    fn beyond(&self, order: u8, end: f64, x: f64, reach: f64) -> f64 {
        let slope = self.inside(1, end);
        let side = (x - end).signum();
        let t = (x - end).abs() / reach;
        match order {
            0 => self.inside(0, end) + side * slope * reach * (t / (1.0 + t)),
            1 => slope / (1.0 + t).powi(2),
            2 => -2.0 * side * slope / (reach * (1.0 + t).powi(3)),
            3 => 6.0 * slope / (reach * reach * (1.0 + t).powi(4)),
            _ => 0.0,
        }
    }
}

/// Slopes at the points: those of the parabola through three neighbours, then limited (Fritsch and Carlson, section 4).
fn slopes(lengths: &[f64], secants: &[f64]) -> Vec<f64> {
    let n = secants.len();
    if n == 1 {
        return vec![secants[0]; 2];
    }
    let mean = |h: f64, k: f64, d: f64, e: f64| (k * d + h * e) / (h + k);
    // One-sided at the ends.
    let end = |h: f64, k: f64, d: f64, e: f64| d + (d - e) * (h / (h + k));
    let mut m = vec![end(lengths[0], lengths[1], secants[0], secants[1])];
    m.extend((1..n).map(|k| mean(lengths[k - 1], lengths[k], secants[k - 1], secants[k])));
    m.push(end(lengths[n - 1], lengths[n - 2], secants[n - 1], secants[n - 2]));
    for k in 0..n {
        let d = secants[k];
        for at in [k, k + 1] {
            // Flat where the data are flat or turn round.
            if d == 0.0 || m[at] * d < 0.0 || (at > 0 && at < n && secants[at - 1] * secants[at] <= 0.0) {
                m[at] = 0.0;
            }
        }
        if d == 0.0 {
            continue;
        }
        let (a, b) = (m[k] / d, m[k + 1] / d);
        // Inside the circle of radius 3 the piece is monotone.
        let radius = a.hypot(b);
        if radius > 3.0 {
            // Scaled so that both stay on the safe side of rounding.
            let shrink = (3.0 - 1e-14) / radius;
            m[k] *= shrink;
            m[k + 1] *= shrink;
        }
    }
    m
}

#[cfg(test)]
mod tests {
    use super::*;

    const X: [f64; 6] = [0.3, 1.0, 1.7, 3.1, 4.0, 6.5];
    const Y: [f64; 6] = [2.0, 2.0, 5.5, 6.0, 9.0, 9.25];

    #[test]
    fn passes_through_its_points_and_is_monotone_between() {
        for through in [Through::Smooth, Through::Straight] {
            let t = Table::new(&X, &Y, through).expect("good points");
            for (x, y) in X.iter().zip(Y) {
                assert!((t.value(0, *x) - y).abs() < 1e-14, "{through:?} at {x}: {}", t.value(0, *x));
            }
            let mut last = f64::NEG_INFINITY;
            for k in 0..=2000 {
                let here = t.value(0, 0.3 + 6.2 * f64::from(k) / 2000.0);
                assert!(here >= last - 1e-14, "{through:?} falls at {k}");
                last = here;
            }
        }
    }

    #[test]
    fn a_parabola_with_a_monotone_course_is_met_closely() {
        // Third order in the distance of the points: halving it must gain nearly a factor of eight.
        let error = |n: u32| {
            let x: Vec<f64> = (0..=n).map(|k| 1.0 + f64::from(k) / f64::from(n)).collect();
            let y: Vec<f64> = x.iter().map(|x| x.exp()).collect();
            let t = Table::new(&x, &y, Through::Smooth).expect("good points");
            (0..1000).map(|k| 1.0 + f64::from(k) / 1000.0).map(|x| (t.value(0, x) - x.exp()).abs()).fold(0.0, f64::max)
        };
        let (coarse, fine) = (error(20), error(40));
        assert!(coarse < 2e-4 && fine < coarse / 6.0, "{coarse:e} {fine:e}");
        let x = [0.0, 1.0, 2.5, 3.0];
        let t = Table::new(&x, &x.map(|x| (x + 1.0) * (x + 1.0)), Through::Smooth).expect("good points");
        assert!((t.value(0, 1.385) - 2.385f64.powi(2)).abs() < 1e-13, "a parabola is met exactly");
    }

    #[test]
    fn derivatives_are_those_of_the_values_also_beyond_the_ends() {
        for through in [Through::Smooth, Through::Straight] {
            let t = Table::new(&X, &Y, through).expect("good points");
            for x in [-2.385, 0.1, 0.5, 1.385, 2.385, 5.0, 7.1, 30.0] {
                for order in 0..3 {
                    let h = 1e-5;
                    let differences = (t.value(order, x + h) - t.value(order, x - h)) / (2.0 * h);
                    assert!((differences - t.value(order + 1, x)).abs() < 1e-5, "{through:?} {order} at {x}");
                }
            }
        }
        let t = Table::new(&[1.0, 2.0], &[1.0, 4.0], Through::Straight).expect("good points");
        assert!(t.value(0, -1e9) >= 0.5 && t.value(0, 1e9) <= 6.0, "levels off without changing sign");
        assert!(t.value(0, f64::NAN).is_nan());
    }

    #[test]
    fn bad_points_make_no_table() {
        assert!(Table::new(&[1.0], &[2.0], Through::Smooth).is_none());
        assert!(Table::new(&[1.0, 1.0], &[2.0, 3.0], Through::Smooth).is_none());
        assert!(Table::new(&[2.0, 1.0], &[2.0, 3.0], Through::Straight).is_none());
        assert!(Table::new(&[1.0, f64::NAN], &[2.0, 3.0], Through::Straight).is_none());
        assert!(Table::new(&[0.0, 1e-300], &[0.0, 1e300], Through::Smooth).is_none(), "slopes overflow");
    }
}
