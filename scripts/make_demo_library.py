"""Make the files of `demo_library/` from its readable tables: an invented bench, computed and seeded.

    python3 scripts/make_demo_library.py            write the files anew
    python3 scripts/make_demo_library.py --check    say whether the files on disk are what the tables give

To let the library grow, add rows to `demo_library/tables/` and run it. Every row of the peak table is checked first:
ion plus loss is the molecule, the nominal m/z is that of the ion, the mechanism has a known name. Isotope satellites
are computed from the ion formulas, so that the table holds fragment ions only. Nothing here comes from a measurement.
Standard library only; the noise is made of sums of uniform numbers, so that every machine and every Python version
gives the same bytes.
"""

from __future__ import annotations

import argparse
import csv
import hashlib
import io
import random
import sys
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from pathlib import Path

# Python leaves the script's own folder out of its search path when PYTHONSAFEPATH is set, as the tests do.
sys.path.insert(0, str(Path(__file__).resolve().parent))

import _demo_tables as t

LIBRARY = Path(__file__).resolve().parent.parent / "demo_library"
SEED = 20260
REPLICATES = (1, 2)
THRESHOLD = 1000
INSTRUMENT = "invented quadrupole GC-MS 1"
METHOD = "invented-VOC-30m"
PHASE = "5% phenyl"
COMMENT = "invented data, computed from a table; not a measurement, not for identification"
MADE_FOLDERS = ("spectra", "unknowns")
TABLE_BEGINS, TABLE_ENDS = "<!-- compounds: made by the script -->", "<!-- end of compounds -->"

MANIFEST_COLUMNS = (
    "file", "index", "compound", "smiles", "cas", "classes", "derivative_of", "status", "standard", "rt_min", "ri",
    "phase", "method", "mass_accuracy", "mz_from", "mz_to", "instrument", "note",
)  # fmt: skip
ASSIGNMENT_COLUMNS = ("file", "index", "mz", "formula", "neutral_loss", "mechanism", "note")


@dataclass(frozen=True)
class Measured:
    """One computed spectrum: peaks in counts, and what its file says about it."""

    title: str
    sample: str
    rt_min: float
    ri: int
    peaks: tuple[tuple[int, int], ...]


# Spectra


def ideal_heights(peaks: Iterable[t.Peak]) -> dict[int, float]:
    """Heights by m/z, satellites included, with the tallest as 1."""
    heights: dict[int, float] = {}
    for peak in peaks:
        for offset, share in enumerate(t.isotope_pattern(t.parse_formula(peak.ion))):
            mz = peak.mz + offset
            if mz <= t.MZ_TO:
                heights[mz] = heights.get(mz, 0.0) + peak.height * share
    tallest = max(heights.values())
    return {mz: height / tallest for mz, height in sorted(heights.items())}


def _bell(rng: random.Random) -> float:
    """Nearly normal, mean 0, deviation 1: a sum of uniform numbers, which rounds alike everywhere."""
    return sum(rng.random() for _ in range(12)) - 6.0


def measure(subject: t.Subject, peaks: Iterable[t.Peak], replicate: int) -> Measured:
    """Pretend to measure: another amount, a slight tilt over the mass range, counting noise, stray peaks, threshold."""
    seed = hashlib.sha256(f"{SEED}|{subject.name}|{replicate}".encode()).digest()
    rng = random.Random(int.from_bytes(seed[:8], "big"))
    base = 300_000 + 600_000 * rng.random()
    tilt = 0.08 * (2 * rng.random() - 1)
    ideal = ideal_heights(peaks)
    counts: dict[int, float] = {}
    for mz, height in ideal.items():
        mean = base * height * (1 + tilt * (mz - 120) / 120)
        counts[mz] = mean + _bell(rng) * (0.025 * mean + (40 * mean) ** 0.5)
    for _ in range(2):
        stray = t.MZ_FROM + int(rng.random() * (max(ideal) - t.MZ_FROM))
        counts.setdefault(stray, THRESHOLD * (1 + rng.random()))
    kept = tuple((mz, round(value)) for mz, value in sorted(counts.items()) if round(value) >= THRESHOLD)
    return Measured(
        title=subject.name.replace("_", " "),
        sample=f"replicate {replicate}" if subject.status else "recycled packaging, thermal extraction",
        rt_min=round(subject.rt_min + 0.015 * (2 * rng.random() - 1), 3),
        ri=subject.ri + int(3 * rng.random()) - 1,
        peaks=kept,
    )


# Files


def _facts(spectrum: Measured) -> list[tuple[str, str]]:
    return [
        ("name", spectrum.title),
        ("mass_accuracy", "unit"),
        ("mz_from", str(t.MZ_FROM)),
        ("mz_to", str(t.MZ_TO)),
        ("threshold", str(THRESHOLD)),
        ("ionisation", "EI"),
        ("electron_energy_ev", "70"),
        ("instrument", INSTRUMENT),
        ("retention_time_min", f"{spectrum.rt_min:.3f}"),
        ("retention_index", str(spectrum.ri)),
        ("phase", PHASE),
        ("carrier_gas", "helium"),
        ("method", METHOD),
        ("sample", spectrum.sample),
        ("comment", COMMENT),
    ]


def as_text(spectrum: Measured) -> str:
    """Two columns between tabs, below labelled lines."""
    lines = [f"# {key}: {value}" for key, value in _facts(spectrum)]
    return "\n".join([*lines, "m/z\tintensity", *(f"{mz}\t{count}" for mz, count in spectrum.peaks)]) + "\n"


def as_decimal_comma(spectrum: Measured) -> str:
    """The same as a spreadsheet in much of Europe writes it: semicolons between columns, a comma for decimals."""
    lines = [
        f"# {key}: {value.replace('.', ',') if key == 'retention_time_min' else value}"
        for key, value in _facts(spectrum)
    ]
    rows = [f"{mz};{count},{mz % 10}" for mz, count in spectrum.peaks]
    return "\n".join([*lines, "m/z;intensity", *rows]) + "\n"


def as_jcamp(spectrum: Measured) -> str:
    """A JCAMP-DX peak table."""
    last = len(spectrum.peaks) - 1
    lines = [
        f"##TITLE= {spectrum.title}",
        "##JCAMP-DX= 5.00",
        "##DATA TYPE= MASS SPECTRUM",
        "##DATA CLASS= PEAK TABLE",
        "##ORIGIN= invented demo library",
        "##OWNER= none, invented data",
        f"##SPECTROMETER/DATA SYSTEM= {INSTRUMENT}",
        f"##SAMPLE DESCRIPTION= {spectrum.sample}",
        "##.INLET= GC",
        "##.IONIZATION MODE= EI+",
        "##.IONIZATION ENERGY= 70",
        f"##.ACQUISITION RANGE= {t.MZ_FROM}-{t.MZ_TO}",
        f"##.RETENTION TIME= {60 * spectrum.rt_min:.2f}",
        f"##$RETENTION INDEX= {spectrum.ri}",
        "##$MASS ACCURACY= unit",
        f"##$COMMENT= {COMMENT}",
        "##XUNITS= M/Z",
        "##YUNITS= COUNTS",
        "##XFACTOR= 1",
        "##YFACTOR= 1",
        f"##FIRSTX= {spectrum.peaks[0][0]}",
        f"##LASTX= {spectrum.peaks[last][0]}",
        f"##NPOINTS= {len(spectrum.peaks)}",
        "##PEAK TABLE= (XY..XY)",
        *(f"{mz}, {count}" for mz, count in spectrum.peaks),
        "##END=",
    ]
    return "\n".join(lines) + "\n"


LAYOUTS: dict[str, tuple[str, Callable[[Measured], str]]] = {
    "text": (".txt", as_text),
    "decimal-comma": (".txt", as_decimal_comma),
    "jcamp": (".jdx", as_jcamp),
}
"""Suffix and writer of each layout."""


def _csv_text(columns: tuple[str, ...], rows: Iterable[dict[str, object]]) -> str:
    buffer = io.StringIO()
    writer = csv.DictWriter(buffer, columns, lineterminator="\n", restval="")
    writer.writeheader()
    writer.writerows(rows)
    return buffer.getvalue()


def compound_table(compounds: Iterable[t.Subject], peaks: Iterable[t.Peak]) -> str:
    """The compounds as a Markdown table."""
    assigned: dict[str, int] = {}
    for peak in peaks:
        assigned[peak.compound] = assigned.get(peak.compound, 0) + bool(peak.mechanism)
    lines = ["| compound | formula | M | CAS | classes | RI | status | assigned |", "|---|---|---|---|---|---|---|---|"]
    lines += [
        f"| {s.name} | {s.formula} | {t.nominal_mass(t.parse_formula(s.formula))} | {s.cas or '-'} | "
        f"{s.classes.replace(';', ', ')} | {s.ri} | {s.status} | {assigned[s.name]} |"
        for s in compounds
    ]
    return "\n".join(lines)


def with_table(readme: str, table: str) -> str:
    """The README with its table of compounds as it should be.

    Raises:
        t.TableError: the README lacks the two marks that the table stands between.
    """
    before, begins, rest = readme.partition(TABLE_BEGINS)
    _, ends, after = rest.partition(TABLE_ENDS)
    if not begins or not ends:
        raise t.TableError(f"README.md: the marks {TABLE_BEGINS} and {TABLE_ENDS} are missing")
    return f"{before}{begins}\n\n{table}\n\n{ends}{after}"


def make_files(library: Path) -> dict[str, str]:
    """All files that the tables give, by path relative to `demo_library/`.

    Raises:
        t.TableError: something is wrong in the tables.
    """
    tables = library / "tables"
    compounds, unknowns, peaks = t.read_compounds(tables), t.read_unknowns(tables), t.read_peaks(tables)
    t.check_tables([*compounds, *unknowns], peaks, t.read_mechanisms(tables))
    of = {s.name: [p for p in peaks if p.compound == s.name] for s in (*compounds, *unknowns)}
    files: dict[str, str] = {}
    manifest: list[dict[str, object]] = []
    assignments: list[dict[str, object]] = []
    for compound in compounds:
        suffix, write = LAYOUTS[compound.layout]
        for replicate in REPLICATES:
            name = f"{compound.stem}_{replicate}{suffix}"
            spectrum = measure(compound, of[compound.name], replicate)
            files[f"spectra/{name}"] = write(spectrum)
            manifest.append(_manifest_row(f"spectra/{name}", compound, spectrum))
        assignments += _assignment_rows(f"{compound.stem}_{REPLICATES[0]}{suffix}", of[compound.name])
    for unknown in unknowns:
        files[f"unknowns/{unknown.stem}.txt"] = as_text(measure(unknown, of[unknown.name], 1))
    files["manifest.csv"] = _csv_text(MANIFEST_COLUMNS, manifest)
    files["assignments.csv"] = _csv_text(ASSIGNMENT_COLUMNS, assignments)
    readme = (library / "README.md").read_text(encoding="utf-8")
    files["README.md"] = with_table(readme, compound_table(compounds, peaks))
    return files


def _manifest_row(file: str, compound: t.Subject, spectrum: Measured) -> dict[str, object]:
    return {
        "file": file,
        "compound": compound.name,
        "smiles": compound.smiles,
        "cas": compound.cas,
        "classes": compound.classes,
        "status": compound.status,
        "standard": compound.standard,
        "rt_min": f"{spectrum.rt_min:.3f}",
        "ri": spectrum.ri,
        "phase": PHASE,
        "method": METHOD,
        "mass_accuracy": "unit",
        "mz_from": t.MZ_FROM,
        "mz_to": t.MZ_TO,
        "instrument": INSTRUMENT,
        "note": COMMENT,
    }


def _assignment_rows(file: str, peaks: Iterable[t.Peak]) -> list[dict[str, object]]:
    return [
        {
            "file": file,
            "index": 1,
            "mz": peak.mz,
            "formula": peak.ion,
            "neutral_loss": peak.loss,
            "mechanism": peak.mechanism,
            "note": peak.note,
        }
        for peak in peaks
        if peak.mechanism
    ]


def differences(library: Path, files: dict[str, str]) -> list[str]:
    """What on disk is not what the tables give, a line each."""
    found = []
    for name, text in sorted(files.items()):
        path = library / name
        if not path.is_file():
            found.append(f"{name} is missing")
        elif path.read_bytes() != text.encode():
            found.append(f"{name} differs")
    for folder in MADE_FOLDERS:
        found += [
            f"{folder}/{path.name} is not made by the tables"
            for path in sorted((library / folder).glob("*"))
            if f"{folder}/{path.name}" not in files
        ]
    return found


def write_files(library: Path, files: dict[str, str]) -> None:
    """Write all files. What the tables do not make is left alone; `--check` names it."""
    for folder in MADE_FOLDERS:
        (library / folder).mkdir(parents=True, exist_ok=True)
    for name, text in files.items():
        (library / name).write_bytes(text.encode())


def main(arguments: list[str] | None = None) -> int:
    """Run the script and return its exit status."""
    parser = argparse.ArgumentParser(description="Make the demo library from its tables.")
    parser.add_argument("--check", action="store_true", help="write nothing; exit 1 when files differ")
    parser.add_argument("--library", type=Path, default=LIBRARY, help="folder of the demo library")
    options = parser.parse_args(arguments)
    try:
        files = make_files(options.library)
    except t.TableError as error:
        print(f"The tables have faults, nothing was written:\n{error}", file=sys.stderr)
        return 1
    if options.check:
        found = differences(options.library, files)
        for line in found:
            print(line)
        if found:
            print("Run: python3 scripts/make_demo_library.py", file=sys.stderr)
            return 1
        print(f"{len(files)} files are what the tables give.")
        return 0
    write_files(options.library, files)
    print(f"{len(files)} files written to {options.library.name}/.")
    return 0


if __name__ == "__main__":
    sys.exit(main())
