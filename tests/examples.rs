//! Every sheet in examples/ is answered, and where a closed form is known the answer agrees with it.

use quadrel::integrals::{Answer, AnswerKind, NoProgress, Settings, answer};
use quadrel::language::{Source, check};
use std::f64::consts::PI;
use std::path::Path;

fn answers(name: &str) -> Vec<Answer> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("examples").join(name);
    let text = std::fs::read_to_string(path).unwrap();
    let model = check(Source::new(name, text)).unwrap_or_else(|errors| panic!("{errors}"));
    assert!(model.warnings.is_empty(), "{name}: {:?}", model.warnings);
    let bindings = model.bind(&[]).unwrap_or_else(|errors| panic!("{errors}"));
    answer(&model, &bindings, &[], &Settings::default(), &NoProgress).unwrap()
}

#[test]
fn every_example_is_answered() {
    let folder = Path::new(env!("CARGO_MANIFEST_DIR")).join("examples");
    let mut count = 0;
    for entry in std::fs::read_dir(folder).unwrap() {
        let name = entry.unwrap().file_name().into_string().unwrap();
        if !name.ends_with(".sheet") {
            continue;
        }
        count += 1;
        let found = answers(&name);
        assert!(!found.is_empty(), "{name} asks nothing");
        for answer in &found {
            assert_eq!(answer.kind, AnswerKind::Estimate, "{name}: {} {:?}", answer.name, answer.reason);
            assert!(answer.components.iter().all(|c| c.value.is_finite() && c.error >= 0.0), "{name}: {}", answer.name);
        }
    }
    assert!(count >= 8, "only {count} examples");
}

/// The answer `name` of a sheet lies within its error of `expected`, which is good to `digits` relative.
fn agrees(sheet: &str, name: &str, component: usize, expected: f64) {
    let found = answers(sheet);
    let answer = found.iter().find(|answer| answer.name == name).unwrap_or_else(|| panic!("{sheet} has no {name}"));
    let part = &answer.components[component];
    let rounding = 4.0 * f64::EPSILON * expected.abs();
    assert!(
        (part.value - expected).abs() <= part.error + rounding,
        "{sheet}: {name} is {} ± {:e}, expected {expected}",
        part.value,
        part.error
    );
}

#[test]
fn closed_forms_agree() {
    // Paraboloid of revolution, any handbook of solids.
    let (d, f) = (3.7_f64, 1.45_f64);
    let dish = 8.0 * PI * f * f / 3.0 * ((1.0 + (d / (4.0 * f)).powi(2)).powf(1.5) - 1.0);
    agrees("antenna-dish.sheet", "surface", 0, dish);
    // Pappus-Guldinus for a torus sector.
    agrees("exchanger-elbow.sheet", "wetted", 0, 2.0 * PI * 0.042 * 0.19 * PI / 2.0);
    agrees("exchanger-elbow.sheet", "inside", 0, PI * 0.042 * 0.042 * 0.19 * PI / 2.0);
    // Catenoid, any text on minimal surfaces; its total curvature from the area of the Gauss image.
    agrees("soap-film.sheet", "soap", 0, PI * (2.0 * 0.9 + (2.0_f64 * 0.9).sinh()));
    agrees("soap-film.sheet", "total", 0, -4.0 * PI * 0.9_f64.tanh());
    // Archimedes' hat-box theorem for a cap of height 0.1 r.
    agrees("skylight.sheet", "glass", 0, 2.0 * PI * 6.0 * 0.6);
    // Cone: slant times radius times pi; the hydrostatic load is the weight of the water above it.
    agrees("settling-tank.sheet", "concrete", 0, PI * 4.5 * 4.5_f64.hypot(1.2));
    agrees("settling-tank.sheet", "push", 0, -9810.0 * PI * 4.5 * 4.5 * (3.0 + 1.2 / 3.0));
    // Spherical cap (Archimedes) and the part of a torus by Pappus-Guldinus, integrated over the meridian angle.
    let (big, small) = (2.4_f64, 0.24_f64);
    let (axis, a) = (big / 2.0 - small, ((big / 2.0 - small) / (big - small)).asin());
    let crown = 2.0 * PI * big * big * (1.0 - a.cos());
    let knuckle = 2.0 * PI * small * (axis * (PI / 2.0 - a) + small * a.cos());
    agrees("vessel-head.sheet", "lining", 0, crown + knuckle);
    agrees("vessel-head.sheet", "share", 0, knuckle / (crown + knuckle));
    // Hyperboloid of one sheet: dA = 2 pi r0 sqrt(1 + q z^2) dz, any table of integrals.
    let (r0, c) = (29.0_f64, 62.0_f64);
    let q = 1.0 / (c * c) + r0 * r0 / c.powi(4);
    let root =
        |z: f64| (z * (1.0 + q * z * z).sqrt() + (q.sqrt() * z + (1.0 + q * z * z).sqrt()).ln() / q.sqrt()) / 2.0;
    agrees("cooling-tower.sheet", "outside", 0, 2.0 * PI * r0 * (root(18.0) + root(84.0)));
    // Helicoid, any table of integrals: (turns*pi)*(s*sqrt(s^2+c^2) + c^2*asinh(s/c)) between the radii.
    let c = 0.18 / (2.0 * PI);
    let part = |s: f64| s * s.hypot(c) + c * c * (s / c + (1.0 + (s / c).powi(2)).sqrt()).ln();
    agrees("auger-flight.sheet", "metal", 0, 5.0 * PI * (part(0.11) - part(0.03)));
    // GRS 80: Moritz (1980) prints the mean radius R2 = 6371007.181 m of the sphere of equal surface; to its 3 decimals.
    let authalic = answers("reference-ellipsoid.sheet").into_iter().find(|a| a.name == "authalic").unwrap();
    assert!((authalic.components[0].value - 6_371_007.181).abs() < 6e-4);
    // Pappus-Guldinus for a tube about a closed curve: 2 pi r L and pi r^2 L, so the two differ by the factor r/2 = 0.15.
    let tube = answers("knotted-tube.sheet");
    let part = |name: &str| &tube.iter().find(|a| a.name == name).unwrap().components[0];
    let (skin, content) = (part("skin"), part("content"));
    assert!((content.value - 0.15 * skin.value).abs() <= content.error + 0.15 * skin.error);
}
