//! Nodes and weights of one-dimensional rules.

/// The Gauss-Legendre rule with `n` nodes on (-1, 1): nodes ascending, and their weights.
///
/// Newton's method on the Legendre polynomial from Tricomi's starting values; nodes and weights are accurate to a few
/// units in the last place (checked against exact polynomial integrals in the tests).
pub fn gauss_legendre(n: usize) -> (Vec<f64>, Vec<f64>) {
    let count = n as f64;
    let mut nodes = vec![0.0; n];
    let mut weights = vec![0.0; n];
    for i in 0..n.div_ceil(2) {
        let angle = std::f64::consts::PI * (i as f64 + 0.75) / (count + 0.5);
        let mut x = (1.0 - (count - 1.0) / (8.0 * count.powi(3))) * angle.cos();
        let mut derivative = 0.0;
        for _ in 0..8 {
            let (value, slope) = legendre(n, x);
            derivative = slope;
            let step = value / slope;
            x -= step;
            if step.abs() <= 1e-16 {
                derivative = legendre(n, x).1;
                break;
            }
        }
        if n % 2 == 1 && i == n / 2 {
            x = 0.0;
            derivative = legendre(n, 0.0).1;
        }
        let weight = 2.0 / ((1.0 - x * x) * derivative * derivative);
        nodes[i] = -x;
        nodes[n - 1 - i] = x;
        weights[i] = weight;
        weights[n - 1 - i] = weight;
    }
    (nodes, weights)
}

/// The Legendre polynomial of degree `n` and its derivative at `x`, by the three-term recurrence.
fn legendre(n: usize, x: f64) -> (f64, f64) {
    let (mut previous, mut current) = (1.0, x);
    if n == 0 {
        return (1.0, 0.0);
    }
    for k in 1..n {
        let k = k as f64;
        (previous, current) = (current, ((2.0 * k + 1.0) * x * current - k * previous) / (k + 1.0));
    }
    let slope = n as f64 * (x * current - previous) / (x * x - 1.0);
    (current, slope)
}

/// Number of nodes of the Kronrod rule.
pub(super) const KRONROD_NODES: usize = 31;

/// The Kronrod extension of the 15-point Gauss rule: node, Kronrod weight, Gauss weight (0 for an added node), for the
/// nodes from 1 down to 0. Computed with mpmath at 80 digits from the Stieltjes polynomial (Kronrod 1965); the tests
/// check the degrees of exactness, 46 and 29.
const KRONROD_HALF: [(f64, f64, f64); 16] = [
    (0.998_002_298_693_397_1, 0.005_377_479_872_923_349, 0.0),
    (0.987_992_518_020_485_4, 0.015_007_947_329_316_122, 0.030_753_241_996_117_27),
    (0.967_739_075_679_139_1, 0.025_460_847_326_715_32, 0.0),
    (0.937_273_392_400_705_9, 0.035_346_360_791_375_85, 0.070_366_047_488_108_12),
    (0.897_264_532_344_081_9, 0.044_589_751_324_764_876, 0.0),
    (0.848_206_583_410_427_2, 0.053_481_524_690_928_09, 0.107_159_220_467_171_94),
    (0.790_418_501_442_465_9, 0.062_009_567_800_670_64, 0.0),
    (0.724_417_731_360_170_1, 0.069_854_121_318_728_26, 0.139_570_677_926_154_3),
    (0.650_996_741_297_417, 0.076_849_680_757_720_38, 0.0),
    (0.570_972_172_608_538_8, 0.083_080_502_823_133_02, 0.166_269_205_816_993_93),
    (0.485_081_863_640_239_7, 0.088_564_443_056_211_77, 0.0),
    (0.394_151_347_077_563_4, 0.093_126_598_170_825_32, 0.186_161_000_015_562_2),
    (0.299_180_007_153_168_8, 0.096_642_726_983_623_68, 0.0),
    (0.201_194_093_997_434_52, 0.099_173_598_721_791_96, 0.198_431_485_327_111_58),
    (0.101_142_066_918_717_5, 0.100_769_845_523_875_6, 0.0),
    (0.0, 0.101_330_007_014_791_55, 0.202_578_241_925_561_28),
];

/// The 31 nodes on (-1, 1) ascending, each with its Kronrod and its Gauss weight.
pub(super) fn kronrod() -> [(f64, f64, f64); KRONROD_NODES] {
    let mut rule = [(0.0, 0.0, 0.0); KRONROD_NODES];
    for (i, &(node, kronrod, gauss)) in KRONROD_HALF.iter().enumerate() {
        rule[i] = (-node, kronrod, gauss);
        rule[KRONROD_NODES - 1 - i] = (node, kronrod, gauss);
    }
    rule
}

/// Node counts of the trapezoid rule on a period. They are primes, so that no two of them alias the same ribs: the
/// first frequency that two neighbours both miss is their product.
pub(super) const TRAPEZOID_NODES: [usize; 8] = [11, 23, 47, 97, 197, 397, 797, 1597];

#[cfg(test)]
mod tests {
    use super::*;

    /// Integral of x^k over (-1, 1), exact.
    fn monomial(k: i32) -> f64 {
        if k % 2 == 0 { 2.0 / f64::from(k + 1) } else { 0.0 }
    }

    #[test]
    fn gauss_legendre_is_exact_to_its_degree() {
        for n in [1, 2, 5, 15, 64, 501] {
            let (x, w) = gauss_legendre(n);
            for k in 0..(2 * n as i32).min(120) {
                let sum: f64 = x.iter().zip(&w).map(|(x, w)| w * x.powi(k)).sum();
                assert!((sum - monomial(k)).abs() < 1e-14, "n = {n}, k = {k}: {sum}");
            }
        }
    }

    #[test]
    fn kronrod_is_exact_to_its_degree() {
        for k in 0..=46 {
            let sum: f64 = kronrod().iter().map(|(x, w, _)| w * x.powi(k)).sum();
            assert!((sum - monomial(k)).abs() < 1e-15, "Kronrod, k = {k}: {sum}");
        }
        for k in 0..=29 {
            let sum: f64 = kronrod().iter().map(|(x, _, w)| w * x.powi(k)).sum();
            assert!((sum - monomial(k)).abs() < 1e-15, "Gauss, k = {k}: {sum}");
        }
        let beyond: f64 = kronrod().iter().map(|(x, _, w)| w * x.powi(30)).sum();
        assert!((beyond - monomial(30)).abs() > 1e-12, "the embedded rule is the 15-point one");
    }
}
