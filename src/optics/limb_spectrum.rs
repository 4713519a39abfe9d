//! The limb of a disk as a weighted sum over the frequencies of a transfer function.
//!
//! # Model
//!
//! For a disk `I(r)` and a transfer function `T(f)` that both do not depend on direction the blurred
//! disk is a Hankel transform, with the limb's curvature in it exactly:
//!
//! ```text
//! B(r) = 2 pi Integral_0^F S(f) T(f) J0(2 pi f r) f df,    S(f) = 2 pi Integral I(r) J0(2 pi f r) r dr
//! ```
//!
//! Far above `k = 2 pi f R = 1` both factors oscillate with the disk's diameter. Written with Hankel
//! functions, `S = Re(C e^{ik})` and `J0(2 pi f r) = Re(G e^{2 pi i f r})`, the product is a slow and a
//! fast part,
//!
//! ```text
//! S J0 = 1/2 Re(C conj(G) e^{2 pi i f (R - r)}) + 1/2 Re(C G e^{2 pi i f (R + r)})
//! ```
//!
//! of which only the slow one, with the distance `R - r` to the limb for its period, adds to the
//! integral. A smooth step `w(k)` from 0 to 1 about `k = 60` separates the two regions: below it the
//! exact product is integrated with weight `1 - w`, above it the slow part with weight `w`.
//!
//! ```text
//! S(f) = 2 pi R^2 Integral_0^1 P5(mu) J0(k sqrt(1 - mu^2)) mu dmu                 sharp edge, k < 90
//! C(f) = 2 pi R^2 sum_n A_n 2^{n/2} Gamma(n/2 + 1) k^{-n/2-1} h_{n/2+1}(k)        sharp edge, k > 30
//! J_v(k) = Re[h_v(k) e^{ik}],   h_v = sqrt(2/(pi k)) e^{-i pi (v/2 + 1/4)} sum_m i^m a_m(v) / k^m
//! a_0 = 1,   a_{m+1} = a_m (4 v^2 - (2m + 1)^2) / (8 (m + 1))
//! ```
//!
//! What the finite thickness of the edge adds is a function of a few arcsec width and is transformed
//! numerically.
//!
//! To first order in `1/R` this is a plane edge under the transfer function `T - i T' / (4 pi R)`: a
//! Gaussian of standard deviation `s` moves the limb by `-s^2 / (2R)`. The derivation: a limb that
//! bends as `x = -y^2 / (2R)` is, at the height `y` of a blur `h(x, y)`, shifted by that much, so that
//! the plane edge is seen under `Integral h (1 + 2 pi i f y^2 / (2R)) e^{-2 pi i f x} dx dy =
//! T - i f T_yy / (4 pi R)`, where `T_yy` is the second derivative across the frequency axis of the
//! limb's normal. For a `T` that depends on `|f|` alone, `T_yy = T' / f`. A transfer function with a
//! direction differs by `-i f (T_yy - T'/f) / (4 pi R)`; the second table of weights is for that.
//!
//! # Valid for
//!
//! Distances from the limb of less than a fifth of the radius.
//!
//! # Accuracy
//!
//! 1e-8 of disk centre against the direct evaluation with Bessel functions at every frequency
//! (`tests/published/disk_transform.rs`).
//!
//! # Source
//!
//! Transform of `(1 - r^2/R^2)^{n/2}`: Sonine's first integral. Hankel's expansion: Abramowitz & Stegun 1964,
//! eqs. 9.2.5 to 9.2.10.

use crate::disk::SolarEdge;
use gauss_quad::GaussLegendre;
use nalgebra::Complex;
use std::f64::consts::{FRAC_1_SQRT_2, FRAC_PI_4, PI, TAU};
use std::num::NonZeroUsize;

/// Nodes per panel of the frequency axis, of the disk's interior, of the edge.
const FREQUENCY_NODES: NonZeroUsize = NonZeroUsize::new(16).unwrap();
const DISK_NODES: NonZeroUsize = NonZeroUsize::new(96).unwrap();
const EDGE_NODES: NonZeroUsize = NonZeroUsize::new(12).unwrap();

/// Where the smooth step between the exact product and its slow part begins and ends, in `k`.
const STEP_FROM: f64 = 30.0;
const STEP_TO: f64 = 90.0;

/// Width of a panel in `k` below the end of the step.
const PANEL: f64 = 10.0;

/// Largest ratio of the ends of a panel above it, and largest phase `2 pi f x` across one, rad.
const PANEL_RATIO: f64 = 3.0;
const PANEL_PHASE_RAD: f64 = 20.0;

/// Terms of Hankel's expansion: at `k = 30` the last is below 1e-13.
const HANKEL_TERMS: usize = 12;

/// A frequency of the quadrature and its weight, cycles per arcsec.
#[derive(Clone, Copy, Debug)]
pub(super) struct Node {
    pub(super) f: f64,
    weight: f64,
}

/// Nodes from zero to the highest frequency, panels never across a kink.
pub(super) fn nodes(
    radius_arcsec: f64,
    highest_cycles_arcsec: f64,
    kinks: &[f64],
    reach_arcsec: f64,
) -> Vec<Node> {
    let per_k = 1.0 / (TAU * radius_arcsec);
    let mut ends: Vec<f64> = (0..=(STEP_TO / PANEL) as usize)
        .map(|i| i as f64 * PANEL * per_k)
        .take_while(|&f| f < highest_cycles_arcsec)
        .collect();
    let widest = PANEL_PHASE_RAD / (TAU * reach_arcsec);
    for &stop in kinks.iter().chain(std::iter::once(&highest_cycles_arcsec)) {
        let mut at = ends[ends.len() - 1];
        if stop <= at {
            continue;
        }
        // Ratio first, then even panels.
        while at * PANEL_RATIO < stop && at * (PANEL_RATIO - 1.0) < widest && at > 0.0 {
            at *= PANEL_RATIO;
            ends.push(at);
        }
        let even = ((stop - at) / widest).ceil().max(1.0);
        ends.extend((1..=even as usize).map(|i| at + (stop - at) * i as f64 / even));
    }
    let rule = GaussLegendre::new(FREQUENCY_NODES);
    ends.windows(2)
        .flat_map(|it| panel(&rule, it[0], it[1]))
        .map(|(f, weight)| Node { f, weight })
        .collect()
}

fn panel(rule: &GaussLegendre, from: f64, to: f64) -> impl Iterator<Item = (f64, f64)> + '_ {
    let (middle, half) = (0.5 * (from + to), 0.5 * (to - from));
    rule.as_node_weight_pairs()
        .iter()
        .map(move |&(x, w)| (middle + half * x, half * w))
}

/// Weights of the limb at given distances, flattened with the distance fastest:
/// `B(x_j) = sum_i [radial_ij T(f_i) + across_ij (T_yy - T'/f)(f_i)]`.
#[derive(Clone, Debug)]
pub(super) struct Weights {
    pub(super) radial: Vec<f64>,
    pub(super) across: Vec<f64>,
}

/// The weights at given distances.
pub(super) fn weights(edge: &SolarEdge, nodes: &[Node], xs_arcsec: &[f64]) -> Weights {
    let radius = edge.radius_arcsec;
    let highest = nodes.last().map_or(0.0, |it| it.f);
    let softening = softening(edge, highest);
    let disk: Vec<(f64, f64)> = panel(&GaussLegendre::new(DISK_NODES), 0.0, 1.0)
        .map(|(mu, weight)| ((1.0 - mu * mu).sqrt(), weight * edge.darkening.at(mu) * mu))
        .collect();
    let mut radial = Vec::with_capacity(nodes.len() * xs_arcsec.len());
    let mut across = Vec::with_capacity(nodes.len() * xs_arcsec.len());
    for node in nodes {
        let wavenumber = TAU * node.f;
        let k = wavenumber * radius;
        let step = smooth_step(k);
        let exact = if step < 1.0 {
            let sharp: f64 = disk.iter().map(|(s, w)| w * libm::j0(k * s)).sum();
            let soft: f64 = softening
                .iter()
                .map(|(x, w)| w * (radius + x) * libm::j0(k + wavenumber * x))
                .sum();
            TAU * (radius * radius * sharp + soft)
        } else {
            0.0
        };
        let slow = if step > 0.0 {
            let soft: Complex<f64> = softening
                .iter()
                .map(|(x, w)| {
                    let phase = Complex::new(0.0, wavenumber * x).exp();
                    hankel(0.0, k + wavenumber * x) * phase * (w * (radius + x))
                })
                .sum();
            sharp_slow(edge, k) + soft * TAU
        } else {
            Complex::new(0.0, 0.0)
        };
        let measure = node.weight * wavenumber;
        let bend = node.f / (2.0 * TAU * radius);
        for x in xs_arcsec {
            let argument = k + wavenumber * x;
            let below = if step < 1.0 {
                (1.0 - step) * exact * libm::j0(argument)
            } else {
                0.0
            };
            let above = if step > 0.0 {
                let back = Complex::new(0.0, -wavenumber * x).exp();
                slow * hankel(0.0, argument).conj() * back * (0.5 * step)
            } else {
                Complex::new(0.0, 0.0)
            };
            radial.push(measure * (below + above.re));
            // Re(conj(above) (-i bend)); below the step the difference is of the order of f^2 p^4.
            across.push(-measure * bend * above.im);
        }
    }
    Weights { radial, across }
}

/// 0 below `STEP_FROM`, 1 above `STEP_TO`, an error function of six standard deviations between.
fn smooth_step(k: f64) -> f64 {
    if k <= STEP_FROM {
        0.0
    } else if k >= STEP_TO {
        1.0
    } else {
        let sigma = (STEP_TO - STEP_FROM) / 12.0;
        let middle = 0.5 * (STEP_FROM + STEP_TO);
        0.5 * libm::erfc((middle - k) / sigma * FRAC_1_SQRT_2)
    }
}

/// `h_v(z)` of `J_v(z) = Re[h_v(z) e^{iz}]`.
fn hankel(v: f64, z: f64) -> Complex<f64> {
    let mut term = 1.0;
    let (mut re, mut im) = (0.0, 0.0);
    for m in 0..HANKEL_TERMS {
        match m % 4 {
            0 => re += term,
            1 => im += term,
            2 => re -= term,
            _ => im -= term,
        }
        let odd = (2 * m + 1) as f64;
        term *= (4.0 * v * v - odd * odd) / (8.0 * (m + 1) as f64 * z);
    }
    let turn = Complex::new(0.0, -PI * 0.5 * v - FRAC_PI_4).exp();
    Complex::new(re, im) * turn * (2.0 / (PI * z)).sqrt()
}

/// `C(f)` of the disk with a sharp edge.
fn sharp_slow(edge: &SolarEdge, k: f64) -> Complex<f64> {
    let sum: Complex<f64> = edge
        .darkening
        .coefficients()
        .iter()
        .enumerate()
        .map(|(n, a)| {
            let half = 0.5 * n as f64;
            let scale = a * 2.0_f64.powf(half) * libm::tgamma(half + 1.0) * k.powf(-half - 1.0);
            hankel(half + 1.0, k) * scale
        })
        .sum();
    sum * (TAU * edge.radius_arcsec * edge.radius_arcsec)
}

/// Distances and weights times values of what the finite thickness adds to the sharp edge.
fn softening(edge: &SolarEdge, highest_cycles_arcsec: f64) -> Vec<(f64, f64)> {
    let scale = edge.scale_arcsec;
    if scale == 0.0 {
        return Vec::new();
    }
    let rule = GaussLegendre::new(EDGE_NODES);
    // Inside, x = -t^2 takes out the root of the limb darkening; exp(-exp(3.7)) is below 1e-17.
    let root = (3.7 * scale).sqrt();
    let inside_panels = 8;
    let inside = (0..inside_panels).flat_map(|i| {
        let edge_of = |i: usize| root * i as f64 / f64::from(inside_panels as u8);
        panel(&rule, edge_of(i), edge_of(i + 1))
            .map(|(t, w)| (-t * t, 2.0 * t * w))
            .collect::<Vec<_>>()
    });
    // Outside it falls as exp(-x/H); panels of 2 H, or of a cycle where that is narrower.
    let reach = 38.0 * scale;
    let width = (2.0 * scale).min(1.0 / highest_cycles_arcsec);
    let panels = (reach / width).ceil();
    let outside = (0..panels as usize).flat_map(|i| {
        let edge_of = |i: usize| reach * i as f64 / panels;
        panel(&rule, edge_of(i), edge_of(i + 1)).collect::<Vec<_>>()
    });
    inside
        .chain(outside)
        .map(|(x, w)| (x, w * edge.softening(x)))
        .collect()
}
