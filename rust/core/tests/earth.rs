//! One-dimensional Earth models against closed forms, and the agreement of
//! their tables with exact rays.

use rayloom_core::earth::{
    Arrival, LayeredEarth, Pairs, Phase, RadialModel, Side, WavefrontTable, first_arrivals,
};

const RADIUS_KM: f64 = 6371.0;

/// A mantle given by rows of depth and velocity, over a slow fluid core.
fn earth(mantle: &[(f64, f64)]) -> LayeredEarth {
    let core_km = mantle[mantle.len() - 1].0;
    let mut depth: Vec<f64> = mantle.iter().map(|row| row.0).collect();
    let mut velocity: Vec<f64> = mantle.iter().map(|row| row.1).collect();
    let mut shear: Vec<f64> = velocity.iter().map(|v| v / 1.8).collect();
    depth.extend([core_km, RADIUS_KM]);
    velocity.extend([6.0, 6.0]);
    shear.extend([0.0, 0.0]);
    LayeredEarth::new(&depth, &velocity, &shear, RADIUS_KM).unwrap()
}

fn arrival(earth: &LayeredEarth, name: &str, degrees: f64, source: f64, receiver: f64) -> Arrival {
    let pairs = Pairs {
        distance_rad: &[degrees.to_radians()],
        source_depth_km: &[source],
        receiver_depth_km: &[receiver],
    };
    first_arrivals(earth, Phase::named(name).unwrap(), pairs).unwrap()[0]
}

fn table(earth: &LayeredEarth, source_km: f64, degrees: (f64, f64)) -> WavefrontTable {
    let phase = Phase::named("P").unwrap();
    let window = (degrees.0.to_radians(), degrees.1.to_radians());
    WavefrontTable::build(earth, phase, source_km, (-5.0, 700.0), window).unwrap()
}

/// A smooth mantle with two discontinuities.
fn realistic() -> LayeredEarth {
    earth(&[
        (0.0, 5.8),
        (35.0, 6.5),
        (35.0, 8.04),
        (210.0, 8.3),
        (410.0, 9.03),
        (410.0, 9.36),
        (660.0, 10.2),
        (660.0, 10.79),
        (1200.0, 11.6),
        (2000.0, 12.8),
        (2800.0, 13.65),
    ])
}

/// Straight rays: T is the chord's length over the velocity.
#[test]
fn uniform_mantle_has_straight_rays() {
    let earth = earth(&[(0.0, 8.0), (5500.0, 8.0)]);
    for (degrees, source, receiver) in [(30.0, 0.0, 0.0), (75.0, 650.0, -4.0), (50.0, 10.0, 300.0)]
    {
        let (a, b) = (RADIUS_KM - source, RADIUS_KM - receiver);
        let angle = f64::to_radians(degrees);
        let chord = (a * a + b * b - 2.0 * a * b * angle.cos()).sqrt();
        let found = arrival(&earth, "P", degrees, source, receiver);
        assert!((found.time_s - chord / 8.0).abs() < 1e-7);
        let parameter = a * b * angle.sin() / (chord * 8.0);
        assert!((found.ray_parameter_s - parameter).abs() < 1e-4 * parameter);
    }
}

/// v = a − b r² makes ds/v a metric of constant negative curvature −4ab, in which
/// sinh(√(ab) T) = √(ab) · chord / √(v₁ v₂) (geometry of the Poincaré ball). The
/// model is tabulated every 5 km.
#[test]
fn quadratic_velocity_has_circular_rays() {
    let (a, b) = (14.0, 14.0 / (RADIUS_KM * RADIUS_KM) * 0.55);
    let velocity = |r: f64| a - b * r * r;
    let rows: Vec<(f64, f64)> = (0..=580)
        .map(|i| 5.0 * f64::from(i))
        .map(|z| (z, velocity(RADIUS_KM - z)))
        .collect();
    let earth = earth(&rows);
    let root = (a * b).sqrt();
    for degrees in [20.0, 45.0, 70.0] {
        let chord = 2.0 * RADIUS_KM * (f64::to_radians(degrees) / 2.0).sin();
        let expected = (root * chord / velocity(RADIUS_KM)).asinh() / root;
        let found = arrival(&earth, "P", degrees, 0.0, 0.0).time_s;
        assert!((found - expected).abs() < 1e-4, "{found} {expected}");
    }
}

#[test]
fn shear_waves_use_their_own_velocity() {
    let earth = realistic();
    let ratio = arrival(&earth, "S", 60.0, 100.0, 0.0).time_s
        / arrival(&earth, "P", 60.0, 100.0, 0.0).time_s;
    assert!((ratio - 1.8).abs() < 1e-9);
}

/// A reflected wave of straight rays bounces at half the distance: the law of
/// cosines. A wave through the inner core needs one; it is then a chord, and turns
/// by π at the centre.
#[test]
fn waves_of_a_uniform_earth_are_chords() {
    let fluid = earth(&[(0.0, 8.0), (3000.0, 8.0)]);
    let (core_km, angle) = (RADIUS_KM - 3000.0, f64::to_radians(30.0));
    let product = 2.0 * RADIUS_KM * core_km * (angle / 2.0).cos();
    let leg_km = (RADIUS_KM * RADIUS_KM + core_km * core_km - product).sqrt();
    let found = arrival(&fluid, "PcP", 30.0, 0.0, 0.0);
    assert!((found.time_s - 2.0 * leg_km / 8.0).abs() < 1e-7);
    assert!(arrival(&fluid, "PKPdf", 150.0, 0.0, 0.0).time_s.is_nan());

    let depth = [0.0, 3000.0, 3000.0, 5000.0, 5000.0, RADIUS_KM];
    let shear = [4.0, 4.0, 0.0, 0.0, 4.0, 4.0];
    let solid = LayeredEarth::new(&depth, &[8.0; 6], &shear, RADIUS_KM).unwrap();
    for degrees in [160.0, 179.0, 179.99, 179.999_999, 180.0] {
        let chord_km = 2.0 * RADIUS_KM * f64::to_radians(degrees / 2.0).sin();
        let found = arrival(&solid, "PKIKP", degrees, 0.0, 0.0).time_s;
        assert!((found - chord_km / 8.0).abs() < 1e-7, "{degrees} {found}");
    }
}

/// Behind the core's edge a wave creeps along it: two tangents and an arc.
#[test]
fn diffraction_of_a_uniform_mantle() {
    let earth = earth(&[(0.0, 8.0), (3000.0, 8.0)]);
    let core_km = RADIUS_KM - 3000.0;
    let tangent_km = (RADIUS_KM * RADIUS_KM - core_km * core_km).sqrt();
    let edge = 2.0 * (core_km / RADIUS_KM).acos();
    assert!(
        arrival(&earth, "Pdiff", edge.to_degrees() - 0.1, 0.0, 0.0)
            .time_s
            .is_nan()
    );
    let arc = f64::to_radians(150.0) - edge;
    let expected = (2.0 * tangent_km + core_km * arc) / 8.0;
    assert!((arrival(&earth, "Pdiff", 150.0, 0.0, 0.0).time_s - expected).abs() < 1e-6);
}

/// A velocity that drops with depth casts a shadow; beyond it rays return.
#[test]
fn low_velocity_zone_casts_a_shadow() {
    let earth = earth(&[
        (0.0, 7.0),
        (100.0, 7.4),
        (100.0, 6.5),
        (400.0, 7.8),
        (2800.0, 13.0),
    ]);
    let arrives = |degrees: f64| arrival(&earth, "P", degrees, 0.0, 0.0).time_s.is_finite();
    let lid = (1..400).map(|i| f64::from(i) * 0.1).find(|&d| !arrives(d));
    let again = (1..400).map(|i| f64::from(i) * 0.1).rfind(|&d| !arrives(d));
    assert!(lid.unwrap() > 5.0, "{lid:?}");
    assert!(
        again.unwrap() > lid.unwrap() + 1.0 && again.unwrap() < 30.0,
        "{again:?}"
    );
}

/// Errors gather where the velocity gradient jumps at the turning point.
#[test]
fn table_agrees_with_exact_rays() {
    let earth = realistic();
    let (mut worst, mut good) = (0.0_f64, 0);
    for source_km in [0.0, 35.0, 500.0] {
        let table = table(&earth, source_km, (28.0, 85.0));
        for step in 0..400 {
            let degrees = 28.0 + f64::from(step * 37 % 400) * 0.1425;
            let depth_km = -5.0 + f64::from(step) * 1.7625;
            let exact = arrival(&earth, "P", degrees, source_km, depth_km);
            let value = table.at(degrees.to_radians(), depth_km).unwrap();
            worst = worst.max((value.time_s - exact.time_s).abs());
            good += usize::from((value.time_s - exact.time_s).abs() < 5e-5);
            assert!((value.per_radian_s - exact.ray_parameter_s).abs() < 0.5);
        }
    }
    assert!(worst < 2e-4, "{worst}");
    assert!(good > 1180, "{good} of 1200");
}

/// The gradient is that of the interpolated time itself.
#[test]
fn table_gradient_is_consistent() {
    let earth = realistic();
    let table = table(&earth, 10.0, (30.0, 60.0));
    let time = |x: f64, z: f64| table.at(x, z).unwrap().time_s;
    for (degrees, depth_km) in [(33.33, 7.1), (45.02, 123.4), (59.9, 655.0)] {
        let x = f64::to_radians(degrees);
        let value = table.at(x, depth_km).unwrap();
        let (dx, dz) = (1e-6, 1e-3);
        let across = (time(x + dx, depth_km) - time(x - dx, depth_km)) / (2.0 * dx);
        let down = (time(x, depth_km + dz) - time(x, depth_km - dz)) / (2.0 * dz);
        assert!((value.per_radian_s - across).abs() < 1e-4 * across);
        assert!((value.per_depth_s_per_km - down).abs() < 1e-6);
        assert!(value.per_depth_s_per_km < 0.0);
    }
}

/// Across a discontinuity the time is continuous and its depth slope jumps.
#[test]
fn table_respects_discontinuities() {
    let earth = realistic();
    let table = table(&earth, 10.0, (30.0, 60.0));
    let x = 50.0_f64.to_radians();
    let above = table.at(x, 410.0 - 1e-6).unwrap();
    let below = table.at(x, 410.0 + 1e-6).unwrap();
    assert!((above.time_s - below.time_s).abs() < 1e-6);
    let p = above.per_radian_s;
    let slope = |v: f64| -(1.0 / (v * v) - (p / (RADIUS_KM - 410.0)).powi(2)).sqrt();
    assert!((above.per_depth_s_per_km - slope(9.03)).abs() < 1e-6);
    assert!((below.per_depth_s_per_km - slope(9.36)).abs() < 1e-6);
}

#[test]
fn table_ends_at_its_window_and_at_the_core() {
    let earth = realistic();
    let table = table(&earth, 0.0, (30.0, 120.0));
    assert!(table.at(30.0_f64.to_radians(), 700.0).is_some());
    assert!(table.at(29.0_f64.to_radians(), 0.0).is_none());
    assert!(table.at(50.0_f64.to_radians(), -5.1).is_none());
    assert!(table.at(50.0_f64.to_radians(), f64::NAN).is_none());
    assert!(table.at(f64::NAN, 0.0).is_none());
    assert!(table.at(115.0_f64.to_radians(), 0.0).is_none());
}

#[test]
fn velocities_and_mean_slowness() {
    let model =
        RadialModel::new(&[0.0, 10.0, 10.0, 30.0], &[5.0, 6.0, 8.0, 8.0], RADIUS_KM).unwrap();
    let close = |a: f64, b: f64| assert!((a - b).abs() < 1e-9, "{a} {b}");
    close(model.velocity_km_s(-3.0, Side::Below), 5.0);
    close(model.velocity_km_s(10.0, Side::Above), 6.0);
    close(model.velocity_km_s(10.0, Side::Below), 8.0);
    let means = model
        .mean_slowness_s_per_km(&[-2.0, 0.0, 10.0, 20.0])
        .unwrap();
    close(means[0], 0.2);
    close(means[1], 1.2_f64.ln());
    close(means[2], 0.125);
}

#[test]
fn bad_models_are_refused() {
    let message = |depth: &[f64], velocity: &[f64]| {
        RadialModel::new(depth, velocity, RADIUS_KM)
            .unwrap_err()
            .to_string()
    };
    assert!(message(&[0.0], &[5.0]).contains("two or more depths"));
    assert!(message(&[1.0, 2.0], &[5.0, 5.0]).contains("first depth"));
    assert!(message(&[0.0, 9.0, 8.0], &[5.0; 3]).contains("row 3"));
    assert!(message(&[0.0, 9.0, 9.0, 9.0], &[5.0; 4]).contains("three times"));
    assert!(message(&[0.0, 7000.0], &[5.0; 2]).contains("last depth"));
    assert!(message(&[0.0, f64::NAN], &[5.0; 2]).contains("row 2"));
    assert!(message(&[0.0, 9.0], &[5.0, 0.0]).contains("velocity in row 2"));
    let solid = LayeredEarth::new(&[0.0, 6371.0], &[8.0; 2], &[4.0; 2], RADIUS_KM);
    assert!(solid.unwrap_err().to_string().contains("fluid core"));
}
