//! Arithmetic on three components: [`Vec3`].

/// Three components: grid coordinates or Cartesian kilometres.
pub type Vec3 = [f64; 3];

/// Scalar product.
#[inline]
#[must_use]
pub fn dot(a: Vec3, b: Vec3) -> f64 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
}

/// `a − b`.
#[inline]
#[must_use]
pub fn sub(a: Vec3, b: Vec3) -> Vec3 {
    [a[0] - b[0], a[1] - b[1], a[2] - b[2]]
}

/// `a + t (b − a)`.
#[inline]
#[must_use]
pub fn lerp(a: Vec3, b: Vec3, t: f64) -> Vec3 {
    [
        a[0] + t * (b[0] - a[0]),
        a[1] + t * (b[1] - a[1]),
        a[2] + t * (b[2] - a[2]),
    ]
}

/// Length of `a`.
#[inline]
#[must_use]
pub fn norm(a: Vec3) -> f64 {
    dot(a, a).sqrt()
}

/// Length of `a − b`.
#[inline]
#[must_use]
pub fn distance(a: Vec3, b: Vec3) -> f64 {
    norm(sub(a, b))
}
