//! The record of what the figure says of the interior.

use super::Parts;
use crate::gravity::{self, Interior, Measured, Uncertain};
use crate::result::record::{ByLaw, Quadrupole, Quantity, ShapeQuantity};
use crate::session::RotationLaw;

/// Quadrupole, excess, J4 and perihelion of a measured figure.
pub(super) fn record(p: &Parts<'_>, oblateness: &ShapeQuantity, p4: &ShapeQuantity) -> Quadrupole {
    let law = p.session.rotation;
    let relativity = gravity::relativity_advance_arcsec();
    let figure = gravity::figure(law).oblateness * gravity::nominal_radius_mas();
    let spread = gravity::spread().oblateness * gravity::nominal_radius_mas();
    let mut out = Quadrupole {
        j2: Quantity::missing("1", OPEN),
        perihelion: Quantity::missing("arcsec/century", OPEN),
        rotation_figure: Quantity::measured(figure, spread, "mas"),
        rotation_law: law.name().to_owned(),
        excess: Quantity::missing("mas", OPEN),
        j2_beside_j4: Quantity::missing("1", OPEN),
        j4: Quantity::missing("1", OPEN_P4),
        perihelion_by_relativity: Quantity::computed(relativity, "arcsec/century"),
        by_law: Vec::new(),
        note: None,
    };
    let Some(measured) = measured(p, oblateness, p4) else {
        return out;
    };
    let found = gravity::interior(&measured, law, false);
    out.excess = known(found.excess_mas, "mas");
    out.j2 = known(found.j2, "1");
    out.perihelion = known(
        (
            gravity::quadrupole_advance_arcsec(found.j2.0),
            gravity::quadrupole_advance_arcsec(found.j2.1),
        ),
        "arcsec/century",
    );
    out.j2_beside_j4 = free(&found, |it| it.0);
    out.j4 = free(&found, |it| it.1);
    out.by_law = RotationLaw::ALL
        .into_iter()
        .filter(|it| *it != RotationLaw::Middle)
        .map(|law| by_law(law, &gravity::interior(&measured, law, true)))
        .collect();
    out.note = (found.j2.0 < 0.0).then(|| NEGATIVE.to_owned());
    out
}

const OPEN: &str = "the oblateness is not separated";
const OPEN_P4: &str = "the next harmonic is not separated";
const NEGATIVE: &str = "J2 is negative: chance, where its uncertainty allows it; otherwise the rotation law, a limb that is no surface of equal pressure, or a systematic error, for a turning body bulges at its equator";

/// The figure as it was measured, by its full uncertainties and the fit's correlation.
fn measured(p: &Parts<'_>, oblateness: &ShapeQuantity, p4: &ShapeQuantity) -> Option<Measured> {
    let pair = |it: &ShapeQuantity| Some((it.value?, it.sigma?));
    Some(Measured {
        oblateness_mas: pair(oblateness)?,
        p4_mas: pair(p4),
        correlation: p.shape.fit.correlation_oblateness_p4(),
    })
}

fn known((value, sigma): Uncertain, unit: &str) -> Quantity {
    Quantity::measured(value, sigma, unit)
}

/// One of the numbers that need `R c4`.
fn free(found: &Interior, pick: impl Fn((Uncertain, Uncertain)) -> Uncertain) -> Quantity {
    found.free.map_or_else(
        || Quantity::missing("1", OPEN_P4),
        |it| known(pick(it), "1"),
    )
}

fn by_law(law: RotationLaw, found: &Interior) -> ByLaw {
    ByLaw {
        law: law.name().to_owned(),
        rotation_figure_mas: found.rotation_mas.0,
        excess: known(found.excess_mas, "mas"),
        j2: known(found.j2, "1"),
        j4: free(found, |it| it.1),
    }
}
