//! One value carried to a footing, step by step.
//!
//! # Model
//!
//! ```text
//! radius       r -> r / 2 (of a diameter) -> asin(r_km / AU) -> asin(d sin r) -> + O (cos^2 B0 / 2 - 1/3)
//!              -> - D(its definition, wavelength, blur) -> other wavelength -> + D(the footing's)
//! oblateness   o -> o / 2 -> o_km as an angle at the limb -> d o -> o / cos^2 B0
//! ```
//!
//! | symbol | meaning | unit |
//! |--------|---------|------|
//! | `d` | distance as seen | au |
//! | `D` | displacement of a definition, see [`super::limb`] | mas |
//! | `O` | equatorial minus polar radius, 7.9 | mas |
//! | `B0` | heliographic latitude of the disk's centre | deg |
//!
//! The mean radius of the visible limb is `R [1 + c2 (3/4 cos^2 B0 - 1/2)]`, and `O = -(3/2) R c2`:
//! hence the step from a mean to the `R` of the harmonics, +1.3 mas. A blur that is the same all
//! around the limb does not move the oblateness.
//!
//! Standard uncertainties of the steps:
//!
//! * mean of the limb: the step over sqrt 3, as it is seldom said which radius was taken;
//! * limb darkening: the other published law in place of the first; where it has no row, 5 percent;
//! * thickness of the edge: the footing's own uncertainty of it;
//! * form of the blur: half of what changes between a Gaussian and a long exposure through air;
//! * width of the blur: the digits that were printed;
//! * another wavelength: the difference of height of [`super::height`], not applied;
//! * `B0` unknown: the middle of 0 to 7.25 degrees, rectangular.
//!
//! The first three and the height are the same for all values, with their sign; form and width of the
//! blur are each value's own. Two values of a group have in common the smaller of their systematic
//! errors: a full correlation of unequal errors would give one of them a weight below zero.
//!
//! # Valid for
//!
//! As [`super::limb`]; distances of 0.2 to 2 au.
//!
//! # Accuracy
//!
//! Geometry 0.001 mas; the rest is what the uncertainties say.
//!
//! # Source
//!
//! Geometry: common practice, no source; IAU 2012 Resolution B2 for the unit of distance.

use super::limb::{Displacements, Form, KM_ARCSEC, Seen, WIDTHS_ARCSEC};
use super::{
    Definition, Distance, Footing, FootingError, Observable, Platform, Published, RadiusOf, Unit,
    height,
};
use crate::constants::ASTRONOMICAL_UNIT;
use crate::disk::DarkeningLaw;
use crate::optics::OpticsError;
use crate::units::MAS_RAD;
use std::collections::BTreeMap;

/// Equatorial minus polar radius that the mean of the limb is corrected with, mas.
const OBLATENESS_MAS: f64 = 7.9;

/// Largest heliographic latitude of the disk's centre from the Earth, degrees.
const LARGEST_B0_DEG: f64 = 7.25;

/// Share of a displacement by which published laws of limb darkening differ: 3.8 of 60 mas for the
/// inflection at 2 arcsec of blur, 35 of 820 mas for a transform over 10 arcsec.
const LAW_SHARE: f64 = 0.05;

/// What several values have in common.
#[derive(Clone, Copy, Debug, PartialEq, Eq, Hash, PartialOrd, Ord)]
pub enum Cause {
    /// The law of limb darkening.
    Darkening,
    /// The thickness of the Sun's edge.
    Edge,
    /// The height of the limb by wavelength.
    Height,
    /// Which radius of an oblate disk was published.
    Mean,
}

/// One step of a value towards the footing.
#[derive(Clone, Debug, PartialEq)]
pub struct Step {
    /// What is done.
    pub name: &'static str,
    /// What it adds, mas.
    pub change_mas: f64,
    /// Standard uncertainty that it brings, mas.
    pub sigma_mas: f64,
    /// The value after it, mas.
    pub after_mas: f64,
    /// How, in words.
    pub how: String,
}

/// A value on the footing.
#[derive(Clone, Debug, PartialEq)]
pub struct Carried {
    /// The value, mas at 1 AU.
    pub value_mas: f64,
    /// The value before the limb's model touched it: geometry alone, mas at 1 AU.
    pub geometric_mas: f64,
    /// Random standard uncertainty, mas.
    pub random_mas: f64,
    /// Systematic standard uncertainty as published, mas.
    pub systematic_mas: f64,
    /// Standard uncertainty from the steps that is this value's own, mas.
    pub own_mas: f64,
    /// Signed shifts by what values have in common, mas for one standard uncertainty of the cause.
    pub shared_mas: BTreeMap<Cause, f64>,
    /// The group whose systematic error it shares.
    pub group: Option<String>,
    /// The steps.
    pub steps: Vec<Step>,
}

impl Carried {
    /// Standard uncertainty from the steps alone, mas.
    pub fn footing_mas(&self) -> f64 {
        let shared: f64 = self.shared_mas.values().map(|it| it * it).sum();
        shared.sqrt().hypot(self.own_mas)
    }

    /// Standard uncertainty, mas.
    pub fn sigma_mas(&self) -> f64 {
        self.random_mas
            .hypot(self.systematic_mas)
            .hypot(self.footing_mas())
    }

    /// What two different values share, mas^2: the causes of the limb's model, and within a group the
    /// smaller of their systematic errors as published; the rest of the larger is its own.
    pub fn covariance(&self, other: &Self) -> f64 {
        let model: f64 = self
            .shared_mas
            .iter()
            .filter_map(|(cause, a)| Some(a * other.shared_mas.get(cause)?))
            .sum();
        let together = self.group.is_some() && self.group == other.group;
        let group = if together {
            let (a, b) = (self.systematic_mas, other.systematic_mas);
            (if a < b { a } else { b }).powi(2)
        } else {
            0.0
        };
        model + group
    }
}

/// A value on its way.
struct Way {
    value_mas: f64,
    random_mas: f64,
    systematic_mas: f64,
    own2: f64,
    shared_mas: BTreeMap<Cause, f64>,
    steps: Vec<Step>,
}

impl Way {
    /// Notes a step to a new value; `scale` is the change of the value with the value before.
    fn to(&mut self, name: &'static str, value_mas: f64, scale: f64, how: String) {
        let change_mas = value_mas - self.value_mas;
        self.value_mas = value_mas;
        self.random_mas *= scale;
        self.systematic_mas *= scale;
        self.steps.push(Step {
            name,
            change_mas,
            sigma_mas: 0.0,
            after_mas: value_mas,
            how,
        });
    }

    /// Gives the last step an uncertainty of this value's own.
    fn own(&mut self, sigma_mas: f64) {
        self.own2 += sigma_mas * sigma_mas;
        self.doubt(sigma_mas);
    }

    /// Gives the last step a signed shift by a cause in common.
    fn shared(&mut self, cause: Cause, shift_mas: f64) {
        *self.shared_mas.entry(cause).or_insert(0.0) += shift_mas;
        self.doubt(shift_mas);
    }

    fn doubt(&mut self, sigma_mas: f64) {
        if let Some(step) = self.steps.last_mut() {
            step.sigma_mas = step.sigma_mas.hypot(sigma_mas);
        }
    }
}

/// Carries a value to a footing.
///
/// # Errors
///
/// [`FootingError`] where the limb's model has no answer, a blur is missing or out of range, or a
/// length on the Sun is said to be "as seen".
pub fn carry(
    it: &Published,
    footing: &Footing,
    limbs: &mut Displacements,
) -> Result<Carried, FootingError> {
    if let (Unit::Km, Distance::Seen(found_au)) = (it.unit, it.distance) {
        return Err(FootingError::KmAsSeen { found_au });
    }
    let mut way = Way {
        value_mas: it.value,
        random_mas: it.sigma_random,
        systematic_mas: it.sigma_systematic,
        own2: 0.0,
        shared_mas: BTreeMap::new(),
        steps: Vec::new(),
    };
    match it.observable {
        Observable::Radius => radius(it, &mut way),
        Observable::Oblateness => oblateness(it, &mut way),
    }
    let geometric_mas = way.value_mas;
    if it.observable == Observable::Radius {
        through_the_limb(it, footing, limbs, &mut way)?;
    }
    Ok(Carried {
        value_mas: way.value_mas,
        geometric_mas,
        random_mas: way.random_mas,
        systematic_mas: way.systematic_mas,
        own_mas: way.own2.sqrt(),
        shared_mas: way.shared_mas,
        group: it.group.clone(),
        steps: way.steps,
    })
}

/// The value in mas, or in km where it is a length; a diameter halved.
fn begin(it: &Published, way: &mut Way) -> f64 {
    let half = if it.diameter { 0.5 } else { 1.0 };
    let factor = match it.unit {
        Unit::Arcsec => 1000.0,
        Unit::Mas | Unit::Km => 1.0,
    };
    way.value_mas *= half * factor;
    way.random_mas *= half * factor;
    way.systematic_mas *= half * factor;
    half
}

/// What the first step says of unit and diameter.
fn beginning(it: &Published, half: f64) -> String {
    let what = if half < 1.0 {
        "a diameter, halved"
    } else {
        "a radius"
    };
    format!("{} {} as published, {what}", it.value, it.unit.word())
}

fn radius(it: &Published, way: &mut Way) {
    let half = begin(it, way);
    if it.unit == Unit::Km {
        let sine = way.value_mas * 1000.0 / ASTRONOMICAL_UNIT.value;
        let value_mas = sine.asin() / MAS_RAD;
        let scale = value_mas / way.value_mas;
        way.to("as published", value_mas, scale, beginning(it, half));
    } else {
        way.to("as published", way.value_mas, 1.0, beginning(it, half));
    }
    if let Some(first) = way.steps.first_mut() {
        first.change_mas = 0.0;
    }
    if let Distance::Seen(distance_au) = it.distance {
        let r = way.value_mas * MAS_RAD;
        let at_1_au = (distance_au * r.sin()).asin();
        let scale = distance_au * r.cos() / at_1_au.cos();
        way.to(
            "to 1 AU",
            at_1_au / MAS_RAD,
            scale,
            format!("seen at {distance_au} AU"),
        );
    }
    if it.radius_of == RadiusOf::Limb {
        let cos2 = it.b0_deg.unwrap_or(0.0).to_radians().cos().powi(2);
        let change = OBLATENESS_MAS * (0.5 * cos2 - 1.0 / 3.0);
        way.to(
            "mean of the limb to R of its harmonics",
            way.value_mas + change,
            1.0,
            "the mean of an oblate limb is not R; over sqrt 3, as it is seldom said which radius was taken"
                .to_owned(),
        );
        way.shared(Cause::Mean, change / 3.0_f64.sqrt());
    }
}

fn oblateness(it: &Published, way: &mut Way) {
    let half = begin(it, way);
    if it.unit == Unit::Km {
        // One kilometre at the limb: 1 / cos of the semi-diameter above the small-angle value.
        let scale = 1000.0 * KM_ARCSEC;
        way.to(
            "as published",
            way.value_mas * scale,
            scale,
            beginning(it, half),
        );
    } else {
        way.to("as published", way.value_mas, 1.0, beginning(it, half));
    }
    if let Some(first) = way.steps.first_mut() {
        first.change_mas = 0.0;
    }
    if let Distance::Seen(distance_au) = it.distance {
        way.to(
            "to 1 AU",
            way.value_mas * distance_au,
            distance_au,
            format!("seen at {distance_au} AU"),
        );
    }
    match it.b0_deg {
        Some(0.0) => {}
        Some(b0_deg) => {
            let scale = b0_deg.to_radians().cos().powi(-2);
            way.to(
                "to B0 = 0",
                way.value_mas * scale,
                scale,
                format!("seen at B0 = {b0_deg} degrees, where the disk shows cos^2 B0 of it"),
            );
        }
        None => {
            let most = LARGEST_B0_DEG.to_radians().cos().powi(-2);
            let scale = 0.5 * (1.0 + most);
            let before = way.value_mas;
            way.to(
                "to B0 = 0",
                before * scale,
                scale,
                format!(
                    "B0 is not known: the middle of 0 to {LARGEST_B0_DEG} degrees, rectangular"
                ),
            );
            way.own(before * 0.5 * (most - 1.0) / 3.0_f64.sqrt());
        }
    }
}

/// A definition at a wavelength and a blur.
struct Edge {
    definition: Definition,
    wavelength_nm: f64,
    fwhm_arcsec: f64,
    form: Form,
}

/// A displacement with the shifts of its causes.
struct Placed {
    mas: f64,
    by_darkening_mas: f64,
    by_edge_mas: f64,
    by_form_mas: f64,
}

fn placed(
    edge: &Edge,
    footing: &Footing,
    limbs: &mut Displacements,
) -> Result<Placed, OpticsError> {
    let seen = Seen {
        law: DarkeningLaw::Neckel2005,
        wavelength_nm: edge.wavelength_nm,
        edge_scale_km: footing.edge_scale_km,
        form: edge.form,
        fwhm_arcsec: edge.fwhm_arcsec,
    };
    let mas = limbs.mas(edge.definition, &seen)?;
    let other_law = Seen {
        law: DarkeningLaw::NeckelLabs1994,
        ..seen
    };
    let by_darkening_mas = match limbs.mas(edge.definition, &other_law) {
        Ok(it) => it - mas,
        Err(OpticsError::Disk(_)) => LAW_SHARE * mas,
        Err(it) => return Err(it),
    };
    let thicker = Seen {
        edge_scale_km: footing.edge_scale_km + footing.edge_scale_sigma_km,
        ..seen
    };
    let other_form = Seen {
        form: match edge.form {
            Form::Gaussian => Form::Air,
            Form::Air => Form::Gaussian,
        },
        ..seen
    };
    Ok(Placed {
        mas,
        by_darkening_mas,
        by_edge_mas: limbs.mas(edge.definition, &thicker)? - mas,
        by_form_mas: 0.5 * (limbs.mas(edge.definition, &other_form)? - mas),
    })
}

/// A blur inside the range of the limb's model.
fn in_range(fwhm_arcsec: f64) -> Result<f64, FootingError> {
    if (WIDTHS_ARCSEC.0..=WIDTHS_ARCSEC.1).contains(&fwhm_arcsec) {
        Ok(fwhm_arcsec)
    } else {
        Err(FootingError::Blur {
            found_arcsec: fwhm_arcsec,
        })
    }
}

/// To the unblurred limb, to the other wavelength, and to the footing's definition.
fn through_the_limb(
    it: &Published,
    footing: &Footing,
    limbs: &mut Displacements,
    way: &mut Way,
) -> Result<(), FootingError> {
    let same_wavelength = (it.wavelength_nm - footing.wavelength_nm).abs() < 1e-9;
    if it.definition.feels_blur() {
        let width = it.blur.ok_or(FootingError::NoBlur {
            definition: it.definition,
        })?;
        let edge = Edge {
            definition: it.definition,
            wavelength_nm: it.wavelength_nm,
            fwhm_arcsec: in_range(width.fwhm_arcsec)?,
            form: match it.platform {
                Platform::Ground => Form::Air,
                Platform::Balloon | Platform::Space => Form::Gaussian,
            },
        };
        let place = placed(&edge, footing, limbs)?;
        way.to(
            "its definition to the limb before the blur",
            way.value_mas - place.mas,
            1.0,
            format!(
                "{} at {} nm, blurred to {} arcsec, lies {:.1} mas from the unblurred limb",
                it.definition, it.wavelength_nm, width.fwhm_arcsec, place.mas
            ),
        );
        way.shared(Cause::Darkening, -place.by_darkening_mas);
        way.shared(Cause::Edge, -place.by_edge_mas);
        way.own(place.by_form_mas);
        way.own(by_width(&edge, width.sigma_arcsec, footing, limbs)?);
    }
    if !same_wavelength {
        let scale_mas = footing.edge_scale_km * KM_ARCSEC * 1000.0;
        let shift = scale_mas * height::difference(footing.wavelength_nm, it.wavelength_nm);
        way.to(
            "to the footing's wavelength",
            way.value_mas,
            1.0,
            format!(
                "from {} to {} nm; by opacity the limb would move by {shift:.1} mas, which is carried as uncertainty",
                it.wavelength_nm, footing.wavelength_nm
            ),
        );
        way.shared(Cause::Height, shift);
    }
    if footing.definition.feels_blur() {
        let edge = Edge {
            definition: footing.definition,
            wavelength_nm: footing.wavelength_nm,
            fwhm_arcsec: in_range(footing.blur_fwhm_arcsec)?,
            form: Form::Air,
        };
        let place = placed(&edge, footing, limbs)?;
        way.to(
            "to the footing's definition",
            way.value_mas + place.mas,
            1.0,
            format!(
                "{} at {} nm, blurred to {} arcsec",
                footing.definition, footing.wavelength_nm, footing.blur_fwhm_arcsec
            ),
        );
        way.shared(Cause::Darkening, place.by_darkening_mas);
        way.shared(Cause::Edge, place.by_edge_mas);
    }
    Ok(())
}

/// Change of the displacement by the printed digits of the width.
fn by_width(
    edge: &Edge,
    sigma_arcsec: f64,
    footing: &Footing,
    limbs: &mut Displacements,
) -> Result<f64, OpticsError> {
    let mut at = |fwhm_arcsec: f64| {
        let (lowest, highest) = WIDTHS_ARCSEC;
        let seen = Seen {
            law: DarkeningLaw::Neckel2005,
            wavelength_nm: edge.wavelength_nm,
            edge_scale_km: footing.edge_scale_km,
            form: edge.form,
            fwhm_arcsec: fwhm_arcsec.clamp(lowest, highest),
        };
        limbs
            .mas(edge.definition, &seen)
            .map(|mas| (mas, seen.fwhm_arcsec))
    };
    // At an end of the range the slope is one-sided.
    let step = 0.05;
    let (low, high) = (at(edge.fwhm_arcsec - step)?, at(edge.fwhm_arcsec + step)?);
    Ok(sigma_arcsec * (high.0 - low.0) / (high.1 - low.1))
}

#[cfg(test)]
#[expect(clippy::float_cmp, reason = "exact by construction")]
mod tests {
    use super::super::Width;
    use super::super::epoch::Epoch;
    use super::*;

    fn footing() -> Footing {
        Footing {
            definition: Definition::Model,
            wavelength_nm: 550.0,
            blur_fwhm_arcsec: 0.0,
            edge_scale_km: 60.0,
            edge_scale_sigma_km: 20.0,
        }
    }

    fn published(observable: Observable, value: f64, unit: Unit) -> Published {
        Published {
            label: "invented".to_owned(),
            platform: Platform::Space,
            epoch: Epoch::parse("2011-06-21").unwrap(),
            wavelength_nm: 550.0,
            observable,
            value,
            unit,
            sigma_random: 0.02,
            sigma_systematic: 0.01,
            definition: Definition::Model,
            blur: None,
            diameter: false,
            radius_of: RadiusOf::Harmonics,
            distance: Distance::OneAu,
            b0_deg: Some(0.0),
            group: None,
            note: String::new(),
        }
    }

    fn carried(it: &Published) -> Carried {
        carry(it, &footing(), &mut Displacements::default()).unwrap()
    }

    #[test]
    fn the_nominal_radius_in_km_is_that_in_arcsec() {
        // IAU 2015 B3 and 2012 B2: asin(695700 km / AU) = 959.23119 arcsec.
        let it = carried(&published(Observable::Radius, 695_700.0, Unit::Km));
        assert!(
            (it.value_mas - 959_231.19).abs() < 0.005,
            "{}",
            it.value_mas
        );
        assert!((it.random_mas - 0.02 * 1.378_795).abs() < 1e-6);
    }

    #[test]
    fn a_diameter_as_seen_is_halved_and_brought_to_one_au() {
        let mut it = published(Observable::Radius, 1952.0, Unit::Arcsec);
        it.diameter = true;
        it.distance = Distance::Seen(0.9833);
        let found = carried(&it);
        // 976 arcsec at 0.9833 au; asin and the plain product differ by 0.12 mas.
        let expected = (0.9833 * (976.0_f64 / 3600.0).to_radians().sin()).asin();
        assert!((found.value_mas - expected.to_degrees() * 3.6e6).abs() < 1e-6);
        assert!((found.value_mas - 0.9833 * 976_000.0).abs() > 0.05);
        assert!((found.random_mas - 10.0 * 0.9833).abs() < 1e-3);
        assert_eq!(found.steps.len(), 2);
    }

    #[test]
    fn oblateness_of_diameters_at_a_tilt() {
        // 16 mas between diameters at B0 = 7.25: 8 / cos^2 = 8.129 mas.
        let mut it = published(Observable::Oblateness, 16.0, Unit::Mas);
        it.diameter = true;
        it.b0_deg = Some(-7.25);
        assert!((carried(&it).value_mas - 8.129_5).abs() < 1e-3);
        it.b0_deg = None;
        let unknown = carried(&it);
        assert!((unknown.value_mas - 8.064_7).abs() < 1e-3);
        assert!((unknown.own_mas - 0.064_7 / 3.0_f64.sqrt()).abs() < 1e-3);
        // 6 km: 8.273 mas.
        let km = carried(&published(Observable::Oblateness, 6.0, Unit::Km));
        assert!((km.value_mas - 8.272_77).abs() < 1e-4);
    }

    #[test]
    fn the_steps_lead_from_the_value_to_the_footing() {
        let mut it = published(Observable::Radius, 959.9, Unit::Arcsec);
        it.definition = Definition::Inflection;
        it.platform = Platform::Ground;
        it.wavelength_nm = 430.0;
        it.radius_of = RadiusOf::Limb;
        it.blur = Some(Width {
            fwhm_arcsec: 2.0,
            sigma_arcsec: 0.03,
        });
        let found = carried(&it);
        let sum: f64 = found.steps.iter().map(|step| step.change_mas).sum();
        assert!((959_900.0 + sum - found.value_mas).abs() < 1e-6);
        assert_eq!(found.steps.last().unwrap().after_mas, found.value_mas);
        // Outward: the blurred inflection lies inside, by about 100 mas at 430 nm and 2 arcsec.
        assert!((30.0..200.0).contains(&(found.value_mas - found.geometric_mas)));
        assert!(found.shared_mas[&Cause::Height].abs() > 5.0);
        assert!(found.own_mas > 1.0);
        // The same definition, wavelength and blur on both sides: the limb's model drops out, but
        // for the form of the blur.
        let same = Footing {
            definition: Definition::Inflection,
            wavelength_nm: 430.0,
            blur_fwhm_arcsec: 2.0,
            ..footing()
        };
        let there = carry(&it, &same, &mut Displacements::default()).unwrap();
        assert!((there.value_mas - there.geometric_mas).abs() < 1e-9);
        assert!(there.shared_mas[&Cause::Edge].abs() < 1e-9);
        assert!(there.shared_mas[&Cause::Darkening].abs() < 1e-9);
    }

    #[test]
    fn what_values_share() {
        let mut it = published(Observable::Radius, 959.9, Unit::Arcsec);
        let plain = carried(&it);
        assert_eq!(plain.covariance(&plain.clone()), 0.0);
        it.group = Some("one".to_owned());
        let grouped = carried(&it);
        assert!((grouped.covariance(&grouped.clone()) - 100.0).abs() < 1e-9);
        assert_eq!(grouped.covariance(&plain), 0.0);
        // Of two unequal systematic errors the smaller is what both have.
        it.sigma_systematic = 0.03;
        let larger = carried(&it);
        assert!((grouped.covariance(&larger) - 100.0).abs() < 1e-9);
        assert_eq!(grouped.covariance(&larger), larger.covariance(&grouped));
    }

    #[test]
    fn what_cannot_be_carried_is_refused() {
        let mut it = published(Observable::Radius, 695_700.0, Unit::Km);
        it.distance = Distance::Seen(0.99);
        let refused =
            |it: &Published| carry(it, &footing(), &mut Displacements::default()).unwrap_err();
        assert!(matches!(refused(&it), FootingError::KmAsSeen { .. }));
        it.distance = Distance::OneAu;
        it.definition = Definition::Inflection;
        assert!(matches!(refused(&it), FootingError::NoBlur { .. }));
        it.blur = Some(Width {
            fwhm_arcsec: 0.1,
            sigma_arcsec: 0.01,
        });
        assert!(matches!(refused(&it), FootingError::Blur { .. }));
        it.blur = Some(Width {
            fwhm_arcsec: 2.0,
            sigma_arcsec: 0.01,
        });
        it.wavelength_nm = 380.0;
        assert!(matches!(refused(&it), FootingError::Limb(_)));
    }
}
