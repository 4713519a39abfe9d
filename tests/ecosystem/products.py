"""Opens the products of a reduction with general libraries, as their readers would.

    python products.py RESULT_FOLDER [truth.json]

Astropy reads every table and image with its units and verifies the checksums; sunpy opens the stack
as a map, whose north, scale, centre, radius and observer must be those of the session. Sources: the
FITS checksum convention and the helioprojective coordinates (Thompson 2006, A&A 449, 791) as these
libraries have them; the Sun's place by astropy's ephemeris, which shares no code with truelimb.
"""

import json
import sys
import warnings
from pathlib import Path

import astropy.units as u
import numpy as np
from astropy.coordinates import EarthLocation
from astropy.io import fits
from astropy.table import Table
from astropy.time import Time

AU_M = 149597870700.0


def fail(text):
    sys.exit(f"products: {text}")


def near(name, found, wanted, within):
    if not abs(found - wanted) <= within:
        fail(f"{name}: {found}, {wanted} +- {within} is right")


def checksums(path):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with fits.open(path, checksum=True) as file:
            file.verify("exception")
            for hdu in file:
                if "CHECKSUM" not in hdu.header or "DATASUM" not in hdu.header:
                    fail(f"{path.name}, {hdu.name or 'primary'}: no checksum")
                if hdu.data is not None and hdu.data.size == 0:
                    fail(f"{path.name}, {hdu.name}: no data")


def tables(folder):
    with_units = {
        "limbs.fits": {"TIME": u.s, "THETA": u.deg, "POSANG": u.deg, "RADIUS": u.arcsec,
                       "SIGMA": u.arcsec, "SEEN": u.arcsec, "BLUR": u.arcsec},
        "seeing.ecsv": {"time": u.s, "r0_blur": u.m, "radius": u.mas, "cos2": u.mas, "sin2": u.mas},
        "budget.ecsv": {"sigma": u.mas, "sigma_radius": u.mas},
    }
    for name, units in with_units.items():
        kind = {"format": "fits", "hdu": 1} if name.endswith(".fits") else {"format": "ascii.ecsv"}
        table = Table.read(folder / name, **kind)
        if len(table) == 0:
            fail(f"{name}: no row")
        for column, unit in units.items():
            if table[column].unit != unit:
                fail(f"{name}, {column}: unit {table[column].unit}, {unit} is right")
    limbs = Table.read(folder / "limbs.fits", hdu=1)
    good = limbs["FLAG"] == 0
    near("limbs.fits: median radius", float(np.median(limbs["RADIUS"][good])), 959.8, 3.0)


def planes(folder):
    with fits.open(folder / "stack.fits") as file:
        names = [it.name for it in file]
        if names[1:] != ["VARIANCE", "WEIGHT"]:
            fail(f"stack.fits: planes {names}")
        image, variance, weight = (it.data for it in file)
        units = [u.Unit(file[i].header["BUNIT"]) for i in (0, 1)]
        if units != [u.adu, u.adu**2]:
            fail(f"stack.fits: units {units}")
        if not image.shape == variance.shape == weight.shape:
            fail("stack.fits: planes of different sizes")
        seen = weight > 0
        if not np.all(np.isfinite(image[seen]) & (variance[seen] > 0)):
            fail("stack.fits: a pixel with weight lacks its value or its variance")
        if np.any(np.isfinite(image[~seen])):
            fail("stack.fits: a value without weight")


def half_light_radius_arcsec(smap, position_angle_deg):
    """Where the brightness falls to a half of what it is 6 arcsec inside, bilinear, arcsec."""
    from astropy.coordinates import SkyCoord
    expected = smap.rsun_obs.to_value("arcsec")
    r = np.arange(expected - 12.0, expected + 12.0, 0.1)
    angle = np.radians(position_angle_deg)
    places = SkyCoord(-r * np.sin(angle) * u.arcsec, r * np.cos(angle) * u.arcsec,
                      frame=smap.coordinate_frame)
    x, y = (it.value for it in smap.world_to_pixel(places))
    i, j = x.astype(int), y.astype(int)
    fx, fy = x - i, y - j
    d = smap.data
    value = (d[j, i] * (1 - fx) * (1 - fy) + d[j, i + 1] * fx * (1 - fy)
             + d[j + 1, i] * (1 - fx) * fy + d[j + 1, i + 1] * fx * fy)
    inner = value[np.searchsorted(r, expected - 6.0)]
    outer = value[-1]
    return float(np.interp(0.5, (inner - value) / (inner - outer), r))


def solar_map(folder, result):
    import sunpy.map
    from sunpy.coordinates import sun

    smap = sunpy.map.Map(folder / "stack.fits")
    if isinstance(smap, list):
        smap = smap[0]
    when = smap.date
    site = result["settings"]["site"]
    place = EarthLocation.from_geodetic(site["longitude_deg"], site["latitude_deg"], site["height_m"])

    # North up, west to the right: the map's axes are the Sun's.
    if not np.allclose(smap.rotation_matrix, np.eye(2), atol=1e-12):
        fail(f"stack.fits: rotated by {smap.rotation_matrix}")
    if smap.coordinate_system.axis1 != "HPLN-TAN" or smap.coordinate_system.axis2 != "HPLT-TAN":
        fail(f"stack.fits: axes {smap.coordinate_system}")
    centre = smap.wcs.world_to_pixel_values(0.0, 0.0)
    half = (np.array(smap.data.shape[::-1]) - 1) / 2
    near("stack.fits: centre", float(np.max(np.abs(centre - half))), 0.0, 1e-6)

    # The observer: B0, L0 and distance by the library's own ephemeris, from the place itself.
    observer = smap.observer_coordinate
    near("B0, deg", observer.heliographic_stonyhurst.lat.deg, sun.B0(when).deg, 0.005)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        near("L0, deg", (smap.meta["crln_obs"] - sun.L0(when).deg + 180.0) % 360.0 - 180.0, 0.0, 0.02)
    geocentric = sun.earth_distance(when).to_value("m")
    # The station is nearer or farther than the Earth's centre by up to an Earth's radius.
    near("distance, m", smap.dsun.to_value("m"), geocentric, 6.5e6)
    lifted = place.get_itrs(Time(when)).cartesian.norm().to_value("m")
    near("OBSGEO, m",
         float(np.linalg.norm([smap.meta[f"obsgeo-{k}"] for k in "xyz"])), lifted, 10.0)

    # The radius: as predicted in the header, as fitted, and as the picture has it.
    near("rsun_obs, arcsec", smap.rsun_obs.to_value("arcsec"),
         np.degrees(np.arcsin(695.7e6 / smap.dsun.to_value("m"))) * 3600.0, 0.01)
    fitted = result["shape"]["radius"]["value"] * AU_M / smap.dsun.to_value("m")
    scale = smap.scale.axis1.to_value("arcsec/pix")
    limb = [half_light_radius_arcsec(smap, it) for it in range(0, 360, 10)]
    # Half light lies within an arcsec of the inflection through this blur and these pixels.
    near("radius in the picture, arcsec", float(np.mean(limb)), fitted, 1.0)
    near("roundness of the picture, arcsec", float(np.ptp(limb)), 0.0, 0.5 * scale)
    near("exposures", smap.meta["nsumexp"], result["selection"]["used"], 0)
    return smap


def main():
    folder = Path(sys.argv[1])
    result = json.loads((folder / "result.json").read_text())
    for name in ("limbs.fits", "stack.fits"):
        checksums(folder / name)
    tables(folder)
    planes(folder)
    try:
        import sunpy.map  # noqa: F401
    except ImportError:
        print("products: Astropy reads all of them; sunpy is not there, the map was not opened")
        return
    smap = solar_map(folder, result)
    print(f"products: Astropy reads all of them, sunpy opens the stack: {smap.data.shape[0]} px, "
          f"{smap.date.isot}, B0 {smap.observer_coordinate.heliographic_stonyhurst.lat.deg:.3f} deg")


if __name__ == "__main__":
    main()
