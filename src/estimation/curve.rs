//! A smooth curve through points that never overshoots them: force against elongation, force against x, thrust against
//! airspeed.
//!
//! Piecewise cubic Hermite with slopes by F. N. Fritsch and J. Butland, *A method for constructing local monotone
//! piecewise cubic interpolants*, SIAM J. Sci. Stat. Comput. 5 (1984) 300-304, in the three-point weighted form;
//! value, slope and integral are exact for the cubic pieces.

use std::sync::Arc;

use thiserror::Error;

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum CurveError {
    #[error("a curve needs at least two points, this one has {n_points}")]
    TooFewPoints { n_points: usize },
    #[error("curve point {point}: {at} does not lie beyond the point before it; list the points in increasing order")]
    NotIncreasing { point: usize, at: f64 },
    #[error("curve point {point} is not a finite number")]
    NotFinite { point: usize },
}

/// One cubic piece: `value = a + d (b + d (c + d e))` with `d` from its start.
#[derive(Debug, Clone, Copy, PartialEq)]
struct Piece {
    start: f64,
    coefficients: [f64; 4],
    /// Integral of the curve from its first point to this piece's start.
    integral: f64,
}

/// A curve; beyond its ends it goes on straight with the slope it ends with.
#[derive(Debug, Clone, PartialEq)]
pub struct Curve {
    pieces: Vec<Piece>,
    knots: Arc<[f64]>,
    pieces_per_unit: f64,
}

/// Value and slope at one place.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ValueSlope {
    pub value: f64,
    pub slope: f64,
}

impl Curve {
    /// Curve through `points` (at, value).
    ///
    /// # Errors
    /// Fewer than two points, points out of order, numbers that are not finite.
    pub fn through(points: &[(f64, f64)]) -> Result<Self, CurveError> {
        if points.len() < 2 {
            return Err(CurveError::TooFewPoints { n_points: points.len() });
        }
        if let Some(point) = points.iter().position(|(at, value)| !at.is_finite() || !value.is_finite()) {
            return Err(CurveError::NotFinite { point });
        }
        if let Some(before) = points.windows(2).position(|pair| pair[1].0 <= pair[0].0) {
            return Err(CurveError::NotIncreasing { point: before + 1, at: points[before + 1].0 });
        }
        let slopes = monotone_slopes(points);
        Ok(Self::from_hermite(points, &slopes))
    }

    /// The same value everywhere.
    pub fn constant(value: f64) -> Self {
        Self::from_hermite(&[(0.0, value), (1.0, value)], &[0.0, 0.0])
    }

    fn from_hermite(points: &[(f64, f64)], slopes: &[f64]) -> Self {
        let mut pieces = Vec::with_capacity(points.len() + 1);
        let mut integral = 0.0;
        for (i, pair) in points.windows(2).enumerate() {
            let (width, rise) = (pair[1].0 - pair[0].0, pair[1].1 - pair[0].1);
            let secant = rise / width;
            let square = (3.0 * secant - 2.0 * slopes[i] - slopes[i + 1]) / width;
            let cube = (slopes[i] + slopes[i + 1] - 2.0 * secant) / (width * width);
            let piece = Piece { start: pair[0].0, coefficients: [pair[0].1, slopes[i], square, cube], integral };
            integral = piece.integral_at(pair[1].0);
            pieces.push(piece);
        }
        let (end, value) = points[points.len() - 1];
        pieces.push(Piece { start: end, coefficients: [value, slopes[slopes.len() - 1], 0.0, 0.0], integral });
        let pieces_per_unit = (points.len() - 1) as f64 / (end - points[0].0);
        Self { pieces, knots: points.iter().map(|point| point.0).collect(), pieces_per_unit }
    }

    /// Multiplies every value by `factor`.
    pub fn scale(&mut self, factor: f64) {
        for piece in &mut self.pieces {
            piece.coefficients.iter_mut().for_each(|coefficient| *coefficient *= factor);
            piece.integral *= factor;
        }
    }

    /// A curve through the same places with every value multiplied by a factor of its own.
    pub fn reshaped(&self, factor: impl Fn(f64) -> f64) -> Self {
        let points: Vec<(f64, f64)> =
            self.pieces.iter().map(|piece| (piece.start, piece.coefficients[0] * factor(piece.start))).collect();
        Self::from_hermite(&points, &monotone_slopes(&points))
    }

    /// Where the pieces join.
    pub fn knots(&self) -> &[f64] {
        &self.knots
    }

    pub fn first(&self) -> f64 {
        self.knots[0]
    }

    pub fn last(&self) -> f64 {
        self.knots[self.knots.len() - 1]
    }

    pub fn last_value(&self) -> f64 {
        self.pieces[self.pieces.len() - 1].coefficients[0]
    }

    #[inline(always)]
    fn piece(&self, at: f64) -> &Piece {
        let last = self.pieces.len() - 1;
        // As if the knots were evenly spaced; a few steps mend the guess.
        let mut index = (((at - self.pieces[0].start) * self.pieces_per_unit) as usize).min(last);
        while index < last && self.pieces[index + 1].start <= at {
            index += 1;
        }
        while index > 0 && self.pieces[index].start > at {
            index -= 1;
        }
        &self.pieces[index]
    }

    #[inline(always)]
    pub fn value(&self, at: f64) -> f64 {
        self.value_slope(at).value
    }

    #[inline(always)]
    pub fn value_slope(&self, at: f64) -> ValueSlope {
        let piece = self.piece(at);
        let d = at - piece.start;
        let [a, b, c, e] = piece.coefficients;
        if d < 0.0 {
            return ValueSlope { value: a + d * b, slope: b };
        }
        ValueSlope { value: a + d * (b + d * (c + d * e)), slope: b + d * (2.0 * c + d * 3.0 * e) }
    }

    /// Integral of the curve from its first point to `at`.
    pub fn integral(&self, at: f64) -> f64 {
        self.piece(at).integral_at(at)
    }
}

impl Piece {
    fn integral_at(&self, at: f64) -> f64 {
        let d = at - self.start;
        let [a, b, c, e] = self.coefficients;
        if d < 0.0 {
            return self.integral + d * (a + d * b / 2.0);
        }
        self.integral + d * (a + d * (b / 2.0 + d * (c / 3.0 + d * e / 4.0)))
    }
}

fn monotone_slopes(points: &[(f64, f64)]) -> Vec<f64> {
    let widths: Vec<f64> = points.windows(2).map(|pair| pair[1].0 - pair[0].0).collect();
    let secants: Vec<f64> =
        points.windows(2).zip(&widths).map(|(pair, width)| (pair[1].1 - pair[0].1) / width).collect();
    if secants.len() == 1 {
        return vec![secants[0]; 2];
    }
    let mut slopes = Vec::with_capacity(points.len());
    slopes.push(end_slope(widths[0], widths[1], secants[0], secants[1]));
    for i in 1..secants.len() {
        let (before, after) = (secants[i - 1], secants[i]);
        if before * after <= 0.0 {
            slopes.push(0.0);
            continue;
        }
        let (w1, w2) = (2.0 * widths[i] + widths[i - 1], widths[i] + 2.0 * widths[i - 1]);
        slopes.push((w1 + w2) / (w1 / before + w2 / after));
    }
    let n = secants.len();
    slopes.push(end_slope(widths[n - 1], widths[n - 2], secants[n - 1], secants[n - 2]));
    slopes
}

/// One-sided three-point slope, kept from overshooting.
fn end_slope(near_width: f64, far_width: f64, near: f64, far: f64) -> f64 {
    let slope = ((2.0 * near_width + far_width) * near - near_width * far) / (near_width + far_width);
    if slope * near <= 0.0 {
        0.0
    } else if near * far <= 0.0 && slope.abs() > 3.0 * near.abs() {
        3.0 * near
    } else {
        slope
    }
}
