"""Reads a result as others will, with libraries that share nothing with the program.

usage: outputs.py PROGRAM SESSION.toml RESULT_FOLDER

* result and session against the JSON Schemas that the program prints (jsonschema, draft 2020-12);
* provenance.json as PROV-JSON (prov);
* tables with units that Astropy knows, descriptions, and UCDs of the IVOA's controlled vocabulary
  (astropy.io.votable.ucd); FITS checksums; times, observer and the stack's coordinates;
* FITS by fitsverify, where it is installed.
"""

import json
import pathlib
import shutil
import subprocess
import sys
import tomllib
import warnings

import jsonschema
import numpy as np
import prov.model
from astropy.io import fits
from astropy.io.votable.ucd import check_ucd
from astropy.table import Table
from astropy.time import Time
from astropy.wcs import WCS

program, session, folder = sys.argv[1], pathlib.Path(sys.argv[2]), pathlib.Path(sys.argv[3])
faults = []


def check(good, words):
    if not good:
        faults.append(words)


def schema(which):
    text = subprocess.run([program, "schema", which], check=True, capture_output=True).stdout
    found = json.loads(text)
    jsonschema.Draft202012Validator.check_schema(found)
    return jsonschema.Draft202012Validator(found)


result = json.loads((folder / "result.json").read_text())
for name, validator, document in [
    ("result.json", schema("result"), result),
    (session.name, schema("session"), tomllib.loads(session.read_text())),
]:
    for error in list(validator.iter_errors(document))[:5]:
        check(False, f"{name}: {error.json_path}: {error.message[:200]}")

# A schema that lets everything pass is none.
spoiled = json.loads(json.dumps(result))
spoiled["shape"]["oblateness"]["status"] = "perhaps"
del spoiled["seed"]
check(len(list(schema("result").iter_errors(spoiled))) >= 2, "the schema of the result refuses nothing")

document = prov.model.ProvDocument.deserialize(folder / "provenance.json", format="json")
kinds = [type(it).__name__ for it in document.get_records()]
inputs = len(result["created_from"])
check(kinds.count("ProvUsage") == inputs, "provenance.json: not every input is used")
check(kinds.count("ProvActivity") == 1 and kinds.count("ProvAgent") == 1, "provenance.json: who made it?")
check(
    kinds.count("ProvEntity") == inputs + kinds.count("ProvGeneration"),
    "provenance.json: entities that neither went in nor came out",
)

tables = ["limbs.fits", *sorted(it.name for it in folder.glob("*.ecsv"))]
check(len(tables) >= 3, f"tables: {tables}")
for name in tables:
    table = Table.read(folder / name)
    header = fits.getheader(folder / name, 1) if name.endswith(".fits") else None
    check(len(table) > 0, f"{name}: no row")
    for index, column in enumerate(table.columns.values(), 1):
        ucd = header.get(f"TUCD{index}") if header else column.meta.get("ucd")
        words = header.get(f"TCOMM{index}") if header else column.description
        place = f"{name}: column {column.name}"
        check(words, f"{place}: no description")
        check(
            ucd and check_ucd(ucd, check_controlled_vocabulary=True),
            f"{place}: UCD {ucd} is not of the vocabulary",
        )
        check(
            column.unit is None or type(column.unit).__name__ != "UnrecognizedUnit",
            f"{place}: unit {column.unit} is unknown",
        )

for path in sorted(folder.glob("*.fits")):
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        with fits.open(path, checksum=True) as file:
            for hdu in file:
                hdu.data
            header = file[1 if path.name == "limbs.fits" else 0].header
            x = [header[f"OBSGEO-{axis}"] for axis in "XYZ"]
            check(6.3e6 < np.linalg.norm(x) < 6.4e6, f"{path.name}: the observer is not on the Earth")
            check(Time(header["DATE-BEG"]) <= Time(header["DATE-END"]), f"{path.name}: times")
            check(header["VERS_SW"] == result["program_version"], f"{path.name}: VERS_SW")
            if path.name == "stack.fits":
                # Astropy itself says more than it should of a header without a time of the WCS.
                warnings.simplefilter("ignore")
                wcs = WCS(header)
                check(list(wcs.wcs.ctype) == ["HPLN-TAN", "HPLT-TAN"], "stack.fits: coordinates")
                check(wcs.wcs.aux.dsun_obs > 1.4e11, "stack.fits: distance of the Sun")
    if shutil.which("fitsverify"):
        told = subprocess.run(["fitsverify", "-q", path], capture_output=True, text=True)
        check("verification OK" in told.stdout, f"fitsverify: {told.stdout}{told.stderr}")
if not shutil.which("fitsverify"):
    print("fitsverify is not installed: FITS was read by Astropy alone")

if faults:
    sys.exit("\n".join(faults))
print(f"{folder}: read by jsonschema, prov and Astropy without a fault")
