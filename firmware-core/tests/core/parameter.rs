//! The parameter map of the knots in f64, both ways.

use firmware_core::ParameterMap;

/// [`ParameterMap::t`] in f64, from the anchors as stored.
pub fn parameter(map: &ParameterMap, setpoint: f64) -> f64 {
    let (from, to) = (f64::from(map.anchor_from), f64::from(map.anchor_to));
    let root = |x: f64| x.max(0.0).sqrt();
    let (u, v) = (
        (setpoint - from) / (to - from),
        (to - setpoint) / (to - from),
    );
    match (map.fold_from, map.fold_to) {
        (false, false) => u,
        (true, false) => root(u),
        (false, true) => -root(v),
        (true, true) => root(u) - root(v),
    }
}

/// The setpoint of a parameter.
pub fn setpoint(map: &ParameterMap, t: f64) -> f64 {
    let (from, to) = (f64::from(map.anchor_from), f64::from(map.anchor_to));
    let u = match (map.fold_from, map.fold_to) {
        (false, false) => t,
        (true, false) => t * t,
        (false, true) => 1.0 - t * t,
        // With u = sin^2 x the parameter is sin x - cos x.
        (true, true) => 0.5 * (1.0 + t * (2.0 - t * t).max(0.0).sqrt()),
    };
    from + u * (to - from)
}
