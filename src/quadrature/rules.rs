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
    (0.9980022986933971, 0.005377479872923349, 0.0),
    (0.9879925180204854, 0.015007947329316122, 0.03075324199611727),
    (0.9677390756791391, 0.02546084732671532, 0.0),
    (0.937273392400706, 0.03534636079137585, 0.07036604748810812),
    (0.8972645323440819, 0.04458975132476488, 0.0),
    (0.8482065834104272, 0.05348152469092809, 0.10715922046717194),
    (0.790418501442466, 0.06200956780067064, 0.0),
    (0.7244177313601701, 0.06985412131872826, 0.1395706779261543),
    (0.650996741297417, 0.07684968075772038, 0.0),
    (0.5709721726085388, 0.08308050282313302, 0.16626920581699392),
    (0.4850818636402397, 0.08856444305621176, 0.0),
    (0.3941513470775634, 0.09312659817082532, 0.1861610000155622),
    (0.2991800071531688, 0.09664272698362368, 0.0),
    (0.20119409399743451, 0.09917359872179196, 0.19843148532711158),
    (0.1011420669187175, 0.1007698455238756, 0.0),
    (0.0, 0.10133000701479156, 0.2025782419255613),
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

/// Node counts of the trapezoid rule on a period. They are primes, so that two neighbours alias only the multiples of
/// their product; [`trapezoid_shift`] tells those apart.
pub(super) const TRAPEZOID_NODES: [usize; 8] = [11, 23, 47, 97, 197, 397, 797, 1597];

/// Where the first node of a level lies within the first step: golden-ratio multiples, different for each level. A
/// frequency that is a multiple of both node counts (253 = 11*23) would look constant to both rules; it has another
/// phase on the shifted nodes of each, so the two sums differ.
pub(super) fn trapezoid_shift(level: usize) -> f64 {
    const GOLDEN: f64 = 0.618_033_988_749_894_9;
    ((level + 1) as f64 * GOLDEN).fract()
}

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
