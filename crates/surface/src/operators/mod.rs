//! Discrete differential operators on the surface.
