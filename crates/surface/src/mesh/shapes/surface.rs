//! The analytic surfaces that generated vertices are kept on.

use crate::Vec3;

/// A smooth surface that a point near it can be brought back to.
pub(super) trait Surface {
    /// The point of the surface next to `point`: nearest up to terms of second order in the distance.
    fn project(&self, point: Vec3) -> Vec3;
    /// Unit normal (outward) at a point on or near the surface.
    fn normal(&self, point: Vec3) -> Vec3;
}

/// Newton's method along the gradient of a level function (value, gradient) whose zero set is the surface.
fn descend(mut point: Vec3, level: impl Fn(&Vec3) -> (f64, Vec3)) -> Vec3 {
    // Newton doubles the digits each time; far points need a few steps more.
    for _ in 0..50 {
        let (value, gradient) = level(&point);
        let steepness = gradient.norm_squared();
        if steepness == 0.0 {
            break;
        }
        let step = gradient * (value / steepness);
        point -= step;
        if step.norm_squared() <= 1e-30 * point.norm_squared() {
            break;
        }
    }
    point
}

/// x²/a² + y²/b² + z²/c² = 1.
pub(super) struct Ellipsoid {
    /// Semi-axes along x, y, z.
    pub axes: Vec3,
}

impl Ellipsoid {
    fn level(&self, p: &Vec3) -> (f64, Vec3) {
        let squares = self.axes.component_mul(&self.axes);
        let scaled = p.component_div(&squares);
        (p.dot(&scaled) - 1.0, 2.0 * scaled)
    }
}

impl Surface for Ellipsoid {
    fn project(&self, point: Vec3) -> Vec3 {
        descend(point, |p| self.level(p))
    }
    fn normal(&self, point: Vec3) -> Vec3 {
        self.level(&point).1.normalize()
    }
}

/// Ring torus about the z axis.
pub(super) struct Torus {
    /// Distance of the tube's centre line from the axis.
    pub major: f64,
    /// Radius of the tube.
    pub minor: f64,
}

impl Torus {
    fn centre(&self, point: &Vec3) -> Vec3 {
        let radial = Vec3::new(point.x, point.y, 0.0);
        radial * (self.major / radial.norm())
    }
}

impl Surface for Torus {
    fn project(&self, point: Vec3) -> Vec3 {
        self.centre(&point) + self.normal(point) * self.minor
    }
    fn normal(&self, point: Vec3) -> Vec3 {
        (point - self.centre(&point)).normalize()
    }
}

/// Cylinder about the z axis that closes on itself after `period`.
pub(super) struct PeriodicCylinder {
    /// Radius.
    pub radius: f64,
    /// Period along z.
    pub period: f64,
}

impl Surface for PeriodicCylinder {
    fn project(&self, point: Vec3) -> Vec3 {
        let mut p = self.normal(point) * self.radius;
        p.z = wrap(point.z, self.period);
        p
    }
    fn normal(&self, point: Vec3) -> Vec3 {
        Vec3::new(point.x, point.y, 0.0).normalize()
    }
}

/// A coordinate brought into [0, period).
pub(super) fn wrap(z: f64, period: f64) -> f64 {
    let wrapped = z.rem_euclid(period);
    // rem_euclid of a tiny negative number rounds up to the period itself.
    if wrapped < period { wrapped } else { 0.0 }
}

/// Cylinder about the z axis from −half_length to half_length, closed by half-spheres.
pub(super) struct CappedCylinder {
    /// Radius of cylinder and caps.
    pub radius: f64,
    /// Half the length of the cylinder between the caps.
    pub half_length: f64,
}

impl Surface for CappedCylinder {
    fn project(&self, point: Vec3) -> Vec3 {
        let centre = point.z.clamp(-self.half_length, self.half_length);
        Vec3::new(0.0, 0.0, centre) + self.normal(point) * self.radius
    }
    fn normal(&self, point: Vec3) -> Vec3 {
        let centre = point.z.clamp(-self.half_length, self.half_length);
        (point - Vec3::new(0.0, 0.0, centre)).normalize()
    }
}

/// The plane z = 0.
pub(super) struct Plane;

impl Surface for Plane {
    fn project(&self, point: Vec3) -> Vec3 {
        Vec3::new(point.x, point.y, 0.0)
    }
    fn normal(&self, _point: Vec3) -> Vec3 {
        Vec3::z()
    }
}

/// Biconcave disc about the z axis: thickness D(t) = √(1−t)·(c₀ + c₂ t + c₄ t²), t = (ρ/radius)².
pub(super) struct BiconcaveDisc {
    /// Radius of the rim.
    pub radius: f64,
    /// c₀, c₂, c₄ as lengths.
    pub thickness: [f64; 3],
}

impl BiconcaveDisc {
    /// z² − D²/4 as a polynomial of ρ²: smooth at the rim and on the axis.
    fn level(&self, p: &Vec3) -> (f64, Vec3) {
        let square = self.radius * self.radius;
        let t = (p.x * p.x + p.y * p.y) / square;
        let [c0, c2, c4] = self.thickness;
        let q = c0 + t * (c2 + t * c4);
        let dq = c2 + 2.0 * t * c4;
        let value = p.z * p.z - 0.25 * (1.0 - t) * q * q;
        // d/dt of the second term, times dt/dx = 2x/R².
        let slope = 0.25 * q * (q - 2.0 * (1.0 - t) * dq) * 2.0 / square;
        (value, Vec3::new(slope * p.x, slope * p.y, 2.0 * p.z))
    }
}

impl Surface for BiconcaveDisc {
    fn project(&self, point: Vec3) -> Vec3 {
        descend(point, |p| self.level(p))
    }
    fn normal(&self, point: Vec3) -> Vec3 {
        self.level(&point).1.normalize()
    }
}
