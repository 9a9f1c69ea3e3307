//! Finds narrow peaks and near-singular places of an integrand from the formulas that cause them.
//!
//! A bump exp(-(r/s)^2) that no sample meets would be missed with an error figure of zero. Its exponent, though, is a
//! smooth formula whose largest value any search finds. So the extreme values of exponents, divisors and radicands are
//! searched instead of the integrand itself, and lines are split there and at a few widths beside.

use super::roots::point;
use super::structure::Feature;
use crate::kernel::Kernel;
use crate::quadrature::Segment;

/// A sharp place: where it is, how far it reaches, and the values at which lines should be split for it.
pub(super) struct SharpPlace {
    pub(super) at: [f64; 2],
    pub(super) extent: [f64; 2],
    pub(super) outer: Vec<f64>,
    pub(super) inner: Vec<f64>,
}

/// Samples per variable of the survey.
const SURVEY: usize = 33;

/// Extreme values that are followed up, for one formula.
const CANDIDATES: usize = 6;

/// An exponent that varies by less than this over the region makes no peak that sampling would miss.
const PEAK_EXPONENT_RANGE: f64 = 8.0;

/// A radicand or divisor is followed where it falls below this fraction of its usual size.
const SMALL_FRACTION: f64 = 0.02;

/// A peak wider than this fraction of the line needs no splits.
const WIDE: f64 = 0.1;

/// Places where the formula of `feature` (computed by `kernel`) makes the integrand sharp.
pub(super) fn sharp_places(
    feature: Feature,
    kernel: &Kernel,
    parameters: &[f64],
    outer: Segment,
    limits_at: &impl Fn(f64) -> Segment,
) -> Vec<SharpPlace> {
    let search = Search { kernel, parameters, outer, limits_at, feature };
    let surveyed = search.survey();
    let sizes: Vec<f64> = surveyed.iter().copied().filter(|score| score.is_finite()).collect();
    let (Some(best), Some(worst)) = (sizes.iter().copied().reduce(f64::max), sizes.iter().copied().reduce(f64::min))
    else {
        return Vec::new();
    };
    let worth_it = match feature {
        Feature::Large(_) | Feature::Step(_) => best - worst > PEAK_EXPONENT_RANGE,
        Feature::Small(_) => worst < best,
    };
    if !worth_it {
        return Vec::new();
    }
    let typical = median(sizes);
    peaks(&surveyed).into_iter().filter_map(|start| search.follow(start, typical)).collect()
}

fn median(mut values: Vec<f64>) -> f64 {
    values.sort_by(f64::total_cmp);
    values[values.len() / 2]
}

fn fraction(i: usize) -> f64 {
    (i as f64 + 0.5) / SURVEY as f64
}

/// Grid points that are at least as large as their neighbours, largest first, as fractions.
fn peaks(scores: &[f64]) -> Vec<[f64; 2]> {
    let at = |i: usize, j: usize| scores[i * SURVEY + j];
    let mut peaks: Vec<(f64, [f64; 2])> = Vec::new();
    for i in 0..SURVEY {
        for j in 0..SURVEY {
            let here = at(i, j);
            let near = |range: usize| range.saturating_sub(1)..(range + 2).min(SURVEY);
            let highest = here.is_finite() && near(i).all(|a| near(j).all(|b| at(a, b).is_nan() || at(a, b) <= here));
            if highest {
                peaks.push((here, [fraction(i), fraction(j)]));
            }
        }
    }
    peaks.sort_by(|a, b| b.0.total_cmp(&a.0));
    peaks.truncate(CANDIDATES);
    peaks.into_iter().map(|(_, place)| place).collect()
}

fn score(value: f64, feature: Feature) -> f64 {
    match feature {
        Feature::Large(_) => value,
        Feature::Small(_) | Feature::Step(_) => -value.abs(),
    }
}

struct Search<'a, L> {
    kernel: &'a Kernel,
    parameters: &'a [f64],
    outer: Segment,
    limits_at: &'a L,
    feature: Feature,
}

impl<L: Fn(f64) -> Segment> Search<'_, L> {
    fn coordinates(&self, fractions: [f64; 2]) -> [f64; 2] {
        let outer = point(self.outer, fractions[0]);
        [outer, point((self.limits_at)(outer), fractions[1])]
    }

    /// What is to be made large, an exponent or minus the size of a divisor, at each of `places` (fractions).
    fn scores(&self, places: &[[f64; 2]]) -> Vec<f64> {
        let (outers, inners): (Vec<f64>, Vec<f64>) =
            places.iter().map(|&place| self.coordinates(place)).map(|[outer, inner]| (outer, inner)).unzip();
        let mut out = vec![0.0; places.len()];
        self.kernel.evaluate(self.parameters, &outers, &inners, &mut out);
        out.into_iter().map(|value| score(value, self.feature)).collect()
    }

    /// The formula on a grid over the region.
    fn survey(&self) -> Vec<f64> {
        let places: Vec<[f64; 2]> =
            (0..SURVEY).flat_map(|i| (0..SURVEY).map(move |j| [fraction(i), fraction(j)])).collect();
        self.scores(&places)
    }

    /// Compass search from a grid point to the extreme value, then its width in both variables.
    fn follow(&self, start: [f64; 2], typical: f64) -> Option<SharpPlace> {
        let mut here = start;
        let mut best = self.scores(&[here])[0];
        let mut step = 0.5 / SURVEY as f64;
        for _ in 0..400 {
            let candidates = [
                [step, 0.0],
                [-step, 0.0],
                [0.0, step],
                [0.0, -step],
                [step, step],
                [step, -step],
                [-step, step],
                [-step, -step],
            ];
            let places =
                candidates.map(|[a, b]| [here[0] + a, here[1] + b].map(|fraction| fraction.clamp(1e-9, 1.0 - 1e-9)));
            let next = self
                .scores(&places)
                .into_iter()
                .map(|value| if value.is_nan() { f64::NEG_INFINITY } else { value })
                .zip(places)
                .max_by(|a, b| a.0.total_cmp(&b.0))?;
            if next.0 > best {
                (best, here) = next;
            } else {
                step *= 0.5;
                if step < 1e-12 {
                    break;
                }
            }
        }
        let small = matches!(self.feature, Feature::Small(_));
        if small && best < SMALL_FRACTION * typical {
            return None;
        }
        let widths = [0, 1].map(|axis| self.width(here, axis, best, typical));
        let place = self.coordinates(here);
        let mut found = SharpPlace { at: place, extent: [0.0; 2], outer: Vec::new(), inner: Vec::new() };
        for axis in 0..2 {
            let reach = widths[axis].map_or(1.0, |width| 6.0 * width);
            let [low, high] = [-reach, reach].map(|shift| {
                let mut fractions = here;
                fractions[axis] = (fractions[axis] + shift).clamp(1e-9, 1.0 - 1e-9);
                self.coordinates(fractions)[axis]
            });
            found.extent[axis] = high - low;
            let Some(width) = widths[axis] else { continue };
            let splits = if axis == 0 { &mut found.outer } else { &mut found.inner };
            for multiple in [-6.0, -1.5, 0.0, 1.5, 6.0] {
                let mut fractions = here;
                fractions[axis] += multiple * width;
                if width > 1e-10 || multiple == 0.0 {
                    let inside = fractions[axis] > 1e-6 && fractions[axis] < 1.0 - 1e-6;
                    if inside {
                        let shifted = if multiple == 0.0 { place } else { self.coordinates(fractions) };
                        splits.push(shifted[axis]);
                    }
                }
            }
        }
        Some(found)
    }

    /// The distance, as a fraction of the line, at which the formula has changed noticeably: an exponent by 1/2, a divisor
    /// by its own size. `None` where the peak is wide or the formula does not change along this axis.
    fn width(&self, here: [f64; 2], axis: usize, best: f64, typical: f64) -> Option<f64> {
        let change = match self.feature {
            Feature::Large(_) | Feature::Step(_) => 0.5,
            Feature::Small(_) => best.abs().max(1e-14 * typical.abs()),
        };
        let mut distance = 1e-12;
        while distance < WIDE {
            let moved = [distance, -distance].map(|shift| {
                let mut fractions = here;
                fractions[axis] += shift;
                let value = self.scores(&[fractions])[0];
                if fractions[axis] <= 0.0 || fractions[axis] >= 1.0 || value.is_nan() { f64::INFINITY } else { value }
            });
            if moved.iter().any(|value| value.is_finite() && best - value > change) {
                return Some(distance);
            }
            distance *= 1.5;
        }
        None
    }
}
