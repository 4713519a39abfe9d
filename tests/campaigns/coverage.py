"""Does the error bar hold? Sessions of the independent model, made, reduced and held against their truth.

    python tests/campaigns/coverage.py FOLDER --profile mixed --n 200 --frames 80 --seed 1
    python tests/campaigns/coverage.py FOLDER --table            # what is there already

Sessions are made one by one, reduced, measured and their frames deleted (`--keep` leaves them); a folder that
has its figures is not made again, so that a run may be stopped and gone on with. Needs the release binary,
`../shared/sim` and the Python packages named in its README.

Beside the pulls it works out what the turbulence realised in those very frames does to the oblateness when it is
passed through the same weights and design: the sum of influence times harmonic over the table FRAMES of limbs.fits.
"""

import argparse
import glob
import json
import os
import shutil
import subprocess
import sys
import types

import numpy as np

HERE = os.path.dirname(os.path.abspath(__file__))
SIM = os.path.join(HERE, "..", "..", "..", "shared", "sim")
FIGURES = "figures.json"


def make(arguments, index):
    """One session of the independent model."""
    sys.path.insert(0, SIM)
    import campaign

    wanted = types.SimpleNamespace(**vars(arguments), dir=arguments.folder)
    campaign.make_one(wanted, index)


def turbulence_alone(folder, truth):
    """What the realised turbulence adds to radius and oblateness through the same fit, mas."""
    from astropy.table import Table

    table = Table.read(os.path.join(folder, "out", "limbs.fits"), hdu="FRAMES")
    realised = {}
    distance = {}
    for burst in truth["bursts"]:
        distance[burst["name"]] = burst["dist_au"]
    names = [burst["name"] for burst in truth["bursts"]]
    for frame in truth["frames"]:
        realised[names.index(frame["file"]), frame["k"]] = (
            np.array(frame["turb_radial_mas"]) * distance[frame["file"]]
        )
    total = np.zeros(2)
    for row in table:
        m0, c2, s2, c4, s4 = realised[int(row["SEQUENCE"]), int(row["FRAME"])]
        north = np.radians(row["NORTH"])
        on_detector = {"RADIUS": m0}
        for m, (c, s) in ((2, (c2, s2)), (4, (c4, s4))):
            turn = (c + 1j * s) * np.exp(1j * m * north)
            on_detector[f"COS{m}"], on_detector[f"SIN{m}"] = turn.real, turn.imag
        for q, front in enumerate("RO"):
            total[q] += sum(row[f"{front}_{name}"] * value for name, value in on_detector.items())
    return total


def measure(folder):
    """The figures of one reduced session."""
    truth = json.load(open(os.path.join(folder, "truth.json")))
    result = json.load(open(os.path.join(folder, "out", "result.json")))
    known = next(
        float(line.split("=")[1])
        for line in open(os.path.join(folder, "session.toml"))
        if line.startswith("scale_arcsec_px")
    )
    shape, oblateness = result["shape"], result["shape"]["oblateness"]
    profile = truth["case"]["profile"]
    figures = dict(profile=profile, status=oblateness["status"])
    r0_true = np.mean([burst["r0_500_zenith_m"] for burst in truth["bursts"]])
    r0 = result["seeing"]["r0"]
    figures.update(r0_true=r0_true, r0=r0["value"], r0_sigma=r0["sigma"])
    by_blur = result["seeing"].get("by_blur", {})
    figures.update(r0_blur=by_blur.get("value"), r0_blur_sigma=by_blur.get("sigma"))
    true_radius = truth["shape"]["R_au_as"] + truth["limb_inflection_offset_as"]
    radius = shape["radius"]
    unscaled = [it["sigma_radius_mas"] for it in result["budget"] if it["term"] != "plate scale"]
    figures.update(
        radius_error=1e3 * (radius["value"] - true_radius),
        radius_sigma=1e3 * radius["sigma"],
        radius_68=[1e3 * (it - true_radius) for it in radius["interval_68"]],
        radius_95=[1e3 * (it - true_radius) for it in radius["interval_95"]],
        unscaled_error=1e3 * (radius["value"] * truth["scale_true"] / known - true_radius),
        unscaled_sigma=float(np.linalg.norm(unscaled)),
    )
    if oblateness["status"] == "measured":
        true = truth["shape"]["dr_mas"]
        turbulence = turbulence_alone(folder, truth)
        figures.update(
            error=oblateness["value"] - true,
            sigma=oblateness["sigma"],
            sigma_random=oblateness["sigma_random"],
            interval_68=[it - true for it in oblateness["interval_68"]],
            interval_95=[it - true for it in oblateness["interval_95"]],
            turbulence=float(turbulence[1]),
            radius_turbulence=float(turbulence[0]),
            p4_error=shape["p4"]["value"] - truth["shape"]["c4_mas"] if shape["p4"]["value"] is not None else None,
            p4_sigma=shape["p4"]["sigma"],
            random_error=result["shape"].get("random_error"),
        )
    json.dump(figures, open(os.path.join(folder, FIGURES), "w"), indent=1)


def within(share, count, level=0.99):
    """Range of a count's share that chance leaves at a level."""
    from scipy.stats import binom

    return [binom.ppf(q, count, share) / count for q in ((1 - level) / 2, (1 + level) / 2)]


def holds(name, pulls, inside_68, inside_95):
    count = len(inside_68)
    a, b = within(0.6827, count), within(0.95, count)
    print(
        f"{name}: pull mean {np.mean(pulls):+.2f} rms {np.sqrt(np.mean(np.square(pulls))):.2f}; "
        f"in 68 %: {np.mean(inside_68):.3f} ({a[0]:.2f} to {a[1]:.2f} by chance); "
        f"in 95 %: {np.mean(inside_95):.3f} ({b[0]:.2f} to {b[1]:.2f})"
    )


def table(folder, one_by_one):
    rows, refused, wrong = [], 0, []
    for path in sorted(glob.glob(os.path.join(folder, "*", FIGURES))):
        it = json.load(open(path))
        it["name"] = os.path.basename(os.path.dirname(path))
        if it["status"] != "measured":
            refused += 1
        if (it["status"] != "measured") != (it["profile"] == "still"):
            wrong.append(it["name"])
        rows.append(it)
    answered = [it for it in rows if it["status"] == "measured"]
    print(f"{len(rows)} sessions, {len(answered)} answered, {refused} refused, wrongly: {wrong or 'none'}")
    if one_by_one:
        for it in rows:
            if it["status"] == "measured":
                print(
                    f"{it['name']} {it['profile']:6s} oblateness {it['error']:+7.2f} +- {it['sigma']:6.2f} "
                    f"(random {it['sigma_random']:6.2f}; turbulence alone {it['turbulence']:+7.2f}), pull {it['error'] / it['sigma']:+5.2f}; "
                    f"radius {it['radius_error']:+7.1f} +- {it['radius_sigma']:6.1f}, scale out {it['unscaled_error']:+6.1f} +- {it['unscaled_sigma']:5.1f}; "
                    f"r0 {it['r0'] / it['r0_true']:.3f}"
                )
    for profile in ["all", *sorted({it["profile"] for it in answered})]:
        some = [it for it in answered if profile in ("all", it["profile"])]
        if not some:
            continue
        column = lambda key: np.array([it[key] for it in some], float)
        inside = lambda key: np.array([it[key][0] <= 0 <= it[key][1] for it in some])
        print(f"-- {profile}: {len(some)}")
        error, sigma = column("error"), column("sigma")
        holds("oblateness", error / sigma, inside("interval_68"), inside("interval_95"))
        rms = lambda it: np.sqrt(np.mean(np.square(it)))
        turbulence = column("turbulence")
        print(
            f"   rms error {rms(error):.2f} mas, turbulence alone {rms(turbulence):.2f} (ratio {rms(error) / rms(turbulence):.3f}), "
            f"difference {rms(error - turbulence):.2f}; median sigma {np.median(sigma):.2f}; turbulence over random sigma rms {rms(turbulence / column('sigma_random')):.2f}"
        )
        p4 = np.array([it["p4_error"] / it["p4_sigma"] for it in some if it["p4_error"] is not None])
        print(f"P4: pull mean {np.mean(p4):+.2f} rms {rms(p4):.2f} of {len(p4)}")
        holds("radius", column("radius_error") / column("radius_sigma"), inside("radius_68"), inside("radius_95"))
        pull = column("unscaled_error") / column("unscaled_sigma")
        holds("radius, scale out", pull, np.abs(pull) <= 1, np.abs(pull) <= 1.96)
        unscaled = column("unscaled_error")
        print(
            f"   mean {np.mean(unscaled):+.1f}, rms {rms(unscaled):.1f} mas; less the realised turbulence: "
            f"mean {np.mean(unscaled - column('radius_turbulence')):+.1f}, rms {rms(unscaled - column('radius_turbulence')):.1f}"
        )
        ratio = column("r0") / column("r0_true")
        r0_pull = (column("r0") - column("r0_true")) / column("r0_sigma")
        print(f"r0: mean ratio {ratio.mean():.3f}, scatter {ratio.std():.3f}, pull rms {rms(r0_pull):.2f}")


def main():
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    parser.add_argument("folder")
    parser.add_argument("--profile", default="mixed")
    parser.add_argument("--n", type=int, default=20)
    parser.add_argument("--first", type=int, default=0, help="index of the first session")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument("--frames", type=int, default=80)
    parser.add_argument("--npix", type=int, default=512)
    parser.add_argument("--scale", type=float, default=4.1)
    parser.add_argument("--air", type=float, default=1.0, help="multiplies every layer's r0")
    parser.add_argument("--binary", default=os.path.join(HERE, "..", "..", "target", "release", "truelimb"))
    parser.add_argument("--keep", action="store_true", help="leave the frames")
    parser.add_argument("--again", action="store_true", help="reduce again what still has its frames")
    parser.add_argument("--table", action="store_true", help="only print what is there")
    parser.add_argument("--within", type=float, help="fail where a shape is further than so many sigma from the truth, or r0 by 40 percent")
    arguments = parser.parse_args()
    if not arguments.table:
        for index in range(arguments.first, arguments.first + arguments.n):
            folder = os.path.join(arguments.folder, f"{index:03d}")
            if os.path.exists(os.path.join(folder, FIGURES)) and not arguments.again:
                continue
            if not os.path.exists(os.path.join(folder, "truth.json")):
                make(arguments, index)
            out = os.path.join(folder, "out")
            run = subprocess.run(
                [arguments.binary, "reduce", os.path.join(folder, "session.toml"), "-o", out, "-q"],
                stdout=subprocess.DEVNULL, stderr=subprocess.PIPE, text=True, check=False,
            )
            if run.returncode not in (0, 3):
                print(folder, "exit", run.returncode, run.stderr.strip()[-300:], flush=True)
                continue
            measure(folder)
            if not arguments.keep:
                for path in glob.glob(os.path.join(folder, "*.fits")):
                    os.remove(path)
                shutil.rmtree(out)
    table(arguments.folder, True)
    if arguments.within:
        check(arguments)


def check(arguments):
    """Ends with a failure where a session is missing, wrongly answered or too far from its truth."""
    paths = sorted(glob.glob(os.path.join(arguments.folder, "*", FIGURES)))
    if len(paths) < arguments.n:
        sys.exit(f"{len(paths)} of {arguments.n} sessions were reduced")
    for path in paths:
        it = json.load(open(path))
        if (it["status"] != "measured") != (it["profile"] == "still"):
            sys.exit(f"{path}: {it['profile']} came out as {it['status']}")
        if it["r0"] is None or not 0.6 < it["r0"] / it["r0_true"] < 1.6:
            sys.exit(f"{path}: r0 {it['r0']} m, truth {it['r0_true']:.4f} m")
        pulls = dict(radius=it["radius_error"] / it["radius_sigma"], unscaled=it["unscaled_error"] / it["unscaled_sigma"])
        if it["status"] == "measured":
            pulls.update(oblateness=it["error"] / it["sigma"], p4=it["p4_error"] / it["p4_sigma"])
        for name, pull in pulls.items():
            if not abs(pull) < arguments.within:
                sys.exit(f"{path}: {name} is {pull:+.1f} sigma from the truth")


if __name__ == "__main__":
    main()
