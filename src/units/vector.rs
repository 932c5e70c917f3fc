//! Vectors and rotations of three dimensions.

/// A Cartesian vector.
pub type Vec3 = [f64; 3];
/// A matrix by rows; as a rotation, its rows are the new axes in the old frame.
pub type Mat3 = [[f64; 3]; 3];

/// Scalar product.
#[inline]
pub fn dot(a: Vec3, b: Vec3) -> f64 {
    a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
}

/// Vector product.
#[inline]
pub fn cross(a: Vec3, b: Vec3) -> Vec3 {
    [
        a[1] * b[2] - a[2] * b[1],
        a[2] * b[0] - a[0] * b[2],
        a[0] * b[1] - a[1] * b[0],
    ]
}

/// `a + factor · b`.
#[inline]
pub fn add_scaled(a: Vec3, factor: f64, b: Vec3) -> Vec3 {
    [
        a[0] + factor * b[0],
        a[1] + factor * b[1],
        a[2] + factor * b[2],
    ]
}

/// `a − b`.
#[inline]
pub fn sub(a: Vec3, b: Vec3) -> Vec3 {
    add_scaled(a, -1.0, b)
}

/// `factor · a`.
#[inline]
pub fn scaled(factor: f64, a: Vec3) -> Vec3 {
    [factor * a[0], factor * a[1], factor * a[2]]
}

/// Length.
#[inline]
pub fn norm(a: Vec3) -> f64 {
    dot(a, a).sqrt()
}

/// The direction of a vector; the null vector stays as it is.
#[inline]
pub fn unit(a: Vec3) -> Vec3 {
    let length = norm(a);
    if length > 0.0 {
        scaled(1.0 / length, a)
    } else {
        a
    }
}

/// The direction of longitude and latitude, radians.
pub fn from_spherical(longitude_rad: f64, latitude_rad: f64) -> Vec3 {
    let (sin_lon, cos_lon) = longitude_rad.sin_cos();
    let (sin_lat, cos_lat) = latitude_rad.sin_cos();
    [cos_lat * cos_lon, cos_lat * sin_lon, sin_lat]
}

/// Angle between two directions in radians, 0 to π; sharp near both ends, where an arc cosine is
/// not.
pub fn separation_rad(a: Vec3, b: Vec3) -> f64 {
    norm(cross(a, b)).atan2(dot(a, b))
}

/// Matrix times vector.
#[inline]
pub fn rotate(matrix: &Mat3, a: Vec3) -> Vec3 {
    [dot(matrix[0], a), dot(matrix[1], a), dot(matrix[2], a)]
}

/// Transposed matrix times vector: the way back of a rotation.
#[inline]
pub fn rotate_back(matrix: &Mat3, a: Vec3) -> Vec3 {
    let first = scaled(a[0], matrix[0]);
    add_scaled(add_scaled(first, a[1], matrix[1]), a[2], matrix[2])
}

/// Matrix product: `second` after `first`.
#[inline]
pub fn product(second: &Mat3, first: &Mat3) -> Mat3 {
    second.map(|row| rotate_back(first, row))
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn rotation_goes_there_and_back() {
        let turn: Mat3 = [[0.0, 1.0, 0.0], [-1.0, 0.0, 0.0], [0.0, 0.0, 1.0]];
        assert_eq!(rotate(&turn, [1.0, 2.0, 3.0]), [2.0, -1.0, 3.0]);
        assert_eq!(rotate_back(&turn, [2.0, -1.0, 3.0]), [1.0, 2.0, 3.0]);
        let twice = product(&turn, &turn);
        assert_eq!(rotate(&twice, [1.0, 2.0, 3.0]), [-1.0, -2.0, 3.0]);
    }

    #[test]
    fn separation_is_sharp_at_both_ends() {
        for angle in [0.0, 1e-9, 1.0, std::f64::consts::PI - 1e-9] {
            let other = from_spherical(angle, 0.0);
            assert!((separation_rad([1.0, 0.0, 0.0], other) - angle).abs() < 1e-15);
        }
    }
}
