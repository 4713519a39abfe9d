"""Fried's parameter by motion and by blur against sessions of an independent forward model.

Slow: 0.04 s of CPU for a frame of 512 px, some 0.3 s at 1024 px, 1 s at 2048 px: ten minutes for all.
Not part of the tests; its figures stand in the headings of src/seeing/motion.rs and src/seeing/blur.rs.

    python3 tests/campaigns/seeing_reach.py make motion DIR    20 sessions, one burst of 500 frames, 4.1 arcsec a pixel
    python3 tests/campaigns/seeing_reach.py make blur DIR      20 sessions at 2.05 and 1.02 arcsec a pixel
    python3 tests/campaigns/seeing_reach.py make own DIR       2 sessions of four seeings through an instrument that blurs
    python3 tests/campaigns/seeing_reach.py run DIR --cmd 'truelimb seeing {session} --json -q'
    python3 tests/campaigns/seeing_reach.py judge DIR

With --cmd given to make, each session is measured when it is made and its frames are deleted.

The forward model is the folder of the variable SKYSIM (../shared/sim by default); it shares no code
with this program. Needs numpy, scipy, astropy, pyerfa, palpy.
"""
import argparse, glob, json, os, shlex, subprocess, sys
import numpy as np

HERE = os.path.dirname(os.path.abspath(__file__))
SIM = os.environ.get("SKYSIM", os.path.join(HERE, "..", "..", "..", "shared", "sim"))

HEIGHTS, OUTER, WIND = (15, 300, 1500, 9000), (8, 20, 25, 30), (4, 7, 11, 24)


def layers(rng, r0):
    share = rng.dirichlet([4, 3, 2, 1.5])
    return [dict(h=h, r0=float(r0 * s ** (-3 / 5)), L0=L, v=float(v * rng.uniform(0.7, 1.4)))
            for h, L, v, s in zip(HEIGHTS, OUTER, WIND, share)]


def common(rng, r0, aperture):
    return dict(start="2026-06-14T05:30:00", aperture_m=float(aperture), wavelength_nm=550.0, layers=layers(rng, r0),
                camera_angle_deg=float(rng.uniform(-30, 30)), peak_e=30000.0, edge_km=float(rng.uniform(60, 110)),
                distortion_mas=dict(m2=[float(rng.uniform(0, 120)), 20], m3=[float(rng.uniform(0, 60)), 50], m4=[10, 5]))


def motion(rng, i, n, frames):
    """r0 from 3 to 20 cm in even steps of its logarithm."""
    r0 = 0.03 * (0.20 / 0.03) ** (i / (n - 1))
    case = common(rng, r0, [0.10, 0.15, 0.20, 0.30][i % 4])
    case.update(npix=512, scale_as_px=4.1, bursts=[dict(kind="burst", frames=frames or 500, dt_s=0.8, at_min=0)])
    return [case]


def blur(rng, i, n, frames):
    """Fried's parameter at the wavelength from 0.3 to 1.1 apertures."""
    aperture = [0.10, 0.15, 0.20][i % 3]
    r0 = max(0.03, aperture * rng.uniform(0.3, 1.1) / (550 / 500) ** 1.2)
    case = common(rng, r0, aperture)
    fine = i >= n - 2
    case.update(npix=2048 if fine else 1024, scale_as_px=1.02 if fine else 2.05,
                bursts=[dict(kind="burst", frames=6 if fine else 16, dt_s=0.8, at_min=0)])
    return [case]


def own(rng, i, n, frames):
    """Four bursts of different seeing through an instrument with a blur of its own, 0.5 or 0.8 arcsec rms on an axis."""
    base = common(rng, 0.1, 0.15)
    cases = []
    for k, r0 in enumerate((0.04, 0.06, 0.09, 0.13)):
        case = dict(base, layers=layers(np.random.default_rng(1000 + i), r0), npix=1024, scale_as_px=2.05)
        case["bursts"] = [dict(kind="burst", frames=14, dt_s=0.8, at_min=6 * k, jitter_as=[0.5, 0.8][i % 2], name=f"burst_{k:03d}")]
        cases.append(case)
    return cases


COUNT = dict(motion=20, blur=20, own=2)


def make(a):
    sys.path.insert(0, SIM)
    import skysim
    n = a.n or COUNT[a.what]
    for i in range(n):
        rng = np.random.default_rng([a.seed, i])
        cases = dict(motion=motion, blur=blur, own=own)[a.what](rng, i, n, a.frames)
        out = os.path.join(a.dir, f"{i:03d}")
        if os.path.exists(os.path.join(out, "truth.json")):
            continue
        seed, bursts = int(rng.integers(1 << 31)), []
        for case in cases:                      # one seed: the same detector and weather for all bursts
            bursts += skysim.make(case, seed, out)["bursts"]
        truth = json.load(open(os.path.join(out, "truth.json")))
        truth["bursts"] = bursts
        text = open(os.path.join(out, "session.toml")).read().split("[[sequence]]")[0]
        for it in bursts:
            text += f'[[sequence]]\nkind = "burst"\nfiles = ["{it["name"]}.fits"]\n\n'
        open(os.path.join(out, "session.toml"), "w").write(text)
        json.dump(truth, open(os.path.join(out, "truth.json"), "w"), indent=1)
        print(out, flush=True)
        if a.cmd:
            measure(a.cmd, os.path.join(out, "session.toml"))
            for f in glob.glob(os.path.join(out, "*.fits")):
                os.remove(f)


def run(a):
    for session in sorted(glob.glob(os.path.join(a.dir, "*", "session.toml"))):
        measure(a.cmd, session)


def measure(cmd, session):
    done = subprocess.run([c.format(session=session) for c in shlex.split(cmd)], capture_output=True, text=True)
    folder = os.path.dirname(session)
    if done.returncode != 0:
        print(folder, "exit", done.returncode, done.stderr.strip()[-300:], flush=True)
        return
    open(os.path.join(folder, "seeing.json"), "w").write(done.stdout)


def judge(a):
    rows = {"by_motion": [], "by_blur": []}
    floors = []
    for path in sorted(glob.glob(os.path.join(a.dir, "*", "seeing.json"))):
        folder = os.path.dirname(path)
        found, truth = json.load(open(path)), json.load(open(os.path.join(folder, "truth.json")))
        strengths = [b["r0_500_zenith_m"] ** (-5 / 3) for b in truth["bursts"]]
        r0 = float(np.mean(strengths) ** (-3 / 5))
        line = f"{folder} D {truth['case']['aperture_m']:.2f} r0 {100 * r0:5.2f} cm"
        for key in rows:
            it = found["seeing"][key]
            if it["value"] is None:
                line += f"  {key} none ({it['reason'][:70]})"
                continue
            rows[key].append((r0, it["value"] / r0, (it["value"] - r0) / it["sigma"]))
            line += f"  {key} {it['value'] / r0:.3f} +- {it['sigma'] / r0:.3f}"
        own_blur = found["seeing"].get("own_blur")
        if own_blur and own_blur["value"] is not None:
            line += f"  own blur {own_blur['value']:.3f} +- {own_blur['sigma']:.3f} arcsec"
        for it in found["harmonics"]:
            if it["m"] in (0, 2, 3, 4) and it["observed_over_predicted"]["value"]:
                floors.append((it["m"], it["observed_over_predicted"]["value"], r0))
        print(line)
    for key, it in rows.items():
        if len(it) > 1:
            r0, ratio, pull = np.array(it).T
            slope = np.polyfit(np.log(r0 / 0.08), ratio, 1)[0] if len(it) > 3 else float("nan")
            print(f"{key}: {len(it)} sessions, mean ratio {ratio.mean():.3f} +- {ratio.std(ddof=1) / len(it) ** 0.5:.3f}, scatter {ratio.std(ddof=1):.3f}, "
                  f"slope with ln r0 {slope:+.3f}, pulls mean {pull.mean():+.2f} rms {np.sqrt((pull ** 2).mean()):.2f}")
    for m in (0, 2, 3, 4):
        it = [f for f in floors if f[0] == m]
        if it:
            ratio = np.array([f[1] for f in it])
            print(f"floor m = {m}: observed over predicted {ratio.mean():.3f}, scatter {ratio.std():.3f}, {len(it)} sessions")


if __name__ == "__main__":
    p = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter)
    s = p.add_subparsers(dest="do", required=True)
    m = s.add_parser("make"); m.add_argument("what", choices=sorted(COUNT)); m.add_argument("dir"); m.add_argument("--seed", type=int, default=1)
    m.add_argument("--n", type=int); m.add_argument("--frames", type=int); m.add_argument("--cmd")
    m = s.add_parser("run"); m.add_argument("dir"); m.add_argument("--cmd", required=True)
    m = s.add_parser("judge"); m.add_argument("dir")
    a = p.parse_args()
    dict(make=make, run=run, judge=judge)[a.do](a)
