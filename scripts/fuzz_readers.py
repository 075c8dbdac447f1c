"""Feed damaged and generated files to the readers of spectra and tables, and report whatever is not a plain refusal.

    python3 scripts/fuzz_readers.py --seconds 120            from a random seed, which is printed
    python3 scripts/fuzz_readers.py --cases 5000 --seed 7    the same cases every time

A finding is an exception other than `InputFileError`, a refusal without advice or on more than one line, a reader that
gives no spectrum, or a case slower than `--slow` seconds. Findings are saved with their seed and traceback to
`--folder`; the exit code is 1 when there are any. Needs the package on the path, and the golden files of the tests.
"""

from __future__ import annotations

import argparse
import faulthandler
import random
import sys
import tempfile
import time
import traceback
from collections.abc import Callable
from dataclasses import dataclass, field
from pathlib import Path

from speclib.errors import InputFileError, InvalidValueError
from speclib.formats.jcamp_writer import WritableSpectrum, write_jcamp
from speclib.formats.options import ReadOptions
from speclib.formats.reading import read_spectra_from_bytes
from speclib.formats.tables import number_in_cell, read_table, whole_number_in_cell
from speclib.model.spectrum import ClaimedAssignment, MassAccuracy, Measurement, Spectrum

GOLDEN = Path(__file__).resolve().parent.parent / "tests" / "golden" / "formats"
COLUMNS = ("file", "index", "mz", "formula", "note")
WORDS = """
0 1 9 43 57.05 1,234 -1 1e5 1e999 1e-999 nan inf ? 0,0 ; , . : = < > ( ) + - " ' # ## $$ % A B E @ J j S s T Z
s999999999 ABC JJT 1A0J ##TITLE= ##END= ##NPOINTS=2 ##NPOINTS=999999999 ##XFACTOR=1e300 ##YFACTOR=0.1 ##FIRSTX=1
##LASTX=9 ##DATATYPE=LINK ##DATATYPE=MASSSPECTRUM ##XUNITS=M/Z ##XUNITS=SECONDS ##BLOCKS=2 ##BLOCK_ID=1 (XY..XY)
(XYW..XYW) (XYA) (XYMA) (X++(Y..Y)) ##PEAKTABLE=(XY..XY) ##XYDATA=(X++(Y..Y)) ##SYMBOL=X,Y,T ##NTUPLES=
##ENDNTUPLES= ##PAGE=T=1 ##UNITS=M/Z,,SECONDS ##FACTOR=1,1,1 ##DATATABLE=(XY..XY),PEAKS ##PEAKASSIGNMENTS=(XYA)
(43,1,<x>) (43,,<x ##CROSSREFERENCE=MS:BLOCK_ID=1 ##DATACLASS=ASSIGNMENTS ##.IONIZATIONMODE=CI-
##.RETENTIONTIME=1e400 ##JCAMP-CS=1 #mz_from:9 #rt:1e999s sep=; m/z file,index
"""
PIECES = (
    *WORDS.split(), " ", "\n", "\t", "\r", "\r\n", "\n\n", "\0", "\x1a", "\ufeff", "\u2028", "\x85", "\u00a0", "\u0661",
    "\ud800", "\n##", "\n$$", "=\n", "a" * 300, "9" * 300, "(" * 50, "<" * 50, ", " * 100,
)  # fmt: skip


@dataclass
class Run:
    """What is looked for, and what was found so far."""

    slow: float
    folder: Path
    findings: list[str] = field(default_factory=list)
    read: int = 0
    refused: int = 0

    def note(self, seed: str, data: bytes, what: str) -> None:
        """Save one finding and print it."""
        self.folder.mkdir(parents=True, exist_ok=True)
        name = f"finding-{seed}"
        (self.folder / f"{name}.bin").write_bytes(data)
        (self.folder / f"{name}.txt").write_text(what, encoding="utf-8", errors="backslashreplace")
        self.findings.append(name)
        print(f"FINDING {name}: {what.strip().splitlines()[-1][:200]!a}", flush=True)


def generated_jcamp(random_: random.Random) -> bytes:
    """A file of the writer with everything it can hold, by chance."""
    spectra = []
    for _ in range(random_.randint(1, 3)):
        mz = sorted({random_.choice((random_.randint(1, 600), random_.uniform(1, 600))) for _ in range(9)})
        spectrum = Spectrum.of(
            mz,
            [random_.uniform(0, 1e6) for _ in mz],
            MassAccuracy.ACCURATE,
            Measurement(
                ionisation="EI", retention_time_s=random_.uniform(0, 1e4), comment="c " * random_.randint(1, 80)
            ),
        )
        claims = tuple(ClaimedAssignment(float(m), None, "f{C2H3O}" * random_.randint(1, 20)) for m in mz[:3])
        spectra.append(WritableSpectrum(spectrum, "title", ("a", "b"), "C3H6O", assignments=claims))
    return write_jcamp(spectra).encode()


def generated_series(random_: random.Random) -> bytes:
    """A series of pages, or a LINK with a compressed table, of two or three forms each."""
    head = "##TITLE= a\n##JCAMP-DX= 5.00\n##DATA TYPE= MASS SPECTRUM\n##XUNITS= M/Z\n"
    if random_.random() < 0.5:
        lists = "##NTUPLES= MASS SPECTRUM\n##VAR_NAME= MASS, INTENSITY, RETENTION TIME,\n##SYMBOL= X, Y, T\n"
        lists += "##UNITS= M/Z, COUNTS, SECONDS\n##FACTOR= 1, 0.1, 1\n"
        pages = "".join(
            f"##PAGE= T= {time_}\n##NPOINTS= 2\n##DATA TABLE= (XY..XY), PEAKS\n43, 100; 57, {time_}\n"
            for time_ in range(1, random_.randint(2, 6))
        )
        return (head + lists + pages + "##END NTUPLES= MASS SPECTRUM\n##END=\n").encode()
    table = random_.choice(("41A0@G0@U\n", "41A0J2T\n43A4j4\n45@\n", "41+1+2+3-0\n45 5 6\n", "41 1 ? 3 4.5 6E+02 7\n"))
    inner = f"{head}##FIRSTX= 41\n##LASTX= 46\n##NPOINTS= 6\n##XYDATA= (X++(Y..Y))\n{table}##END=\n"
    return ("##TITLE= l\n##DATA TYPE= LINK\n##BLOCKS= 1\n##CAS NAME= n\n" + inner + "##END=\n").encode()


def generated_text(random_: random.Random) -> bytes:
    """Two columns under labelled lines, with one of the separators and decimal marks."""
    sign, mark = random_.choice("\t; ,"), random_.choice(".,")
    rows = [f"{random_.uniform(1, 500):.{random_.randint(0, 5)}f}{sign}{random_.randint(0, 999)}" for _ in range(8)]
    lines = ["# name: x", f"# mz_range: 30-{random_.randint(1, 600)}", *[row.replace(".", mark) for row in rows]]
    return "\n".join(lines).encode()


def generated_table(random_: random.Random) -> bytes:
    """A table with a header, as a manifest."""
    sign = random_.choice(",;\t")
    names = random_.sample(COLUMNS, random_.randint(1, len(COLUMNS)))
    rows = [[random_.choice(("", "1", "2,5", '"a;b"', '"two\nlines"', "x")) for _ in names] for _ in range(4)]
    text = "\r\n".join(sign.join(row) for row in [names, *rows])
    return text.encode(random_.choice(("utf-8", "utf-8-sig", "utf-16")))


def mutated(random_: random.Random, data: bytes, others: list[bytes]) -> bytes:
    """The same bytes with some pieces cut, doubled, moved, replaced or mixed with another file."""
    for _ in range(random_.choice((1, 1, 1, 2, 3, 8))):
        start = random_.randint(0, len(data))
        end = min(len(data), start + random_.choice((0, 1, 1, 2, 5, 20, 200)))
        kind = random_.randrange(8)
        if kind == 0:
            data = data[:start] + data[end:]
        elif kind == 1:
            data = data[:start] + data[start:end] * random_.choice((2, 3, 50)) + data[end:]
        elif kind == 2:
            data = data[:start] + bytes(random_.randrange(256) for _ in range(random_.randint(1, 4))) + data[end:]
        elif kind == 3:
            other = random_.choice(others)
            cut = random_.randint(0, len(other))
            data = data[:start] + other[cut : cut + random_.randint(0, 400)] + data[end:]
        elif kind == 4:
            lines = data.split(b"\n")
            random_.shuffle(lines)
            data = b"\n".join(lines) if random_.random() < 0.3 else data[:start]
        else:
            piece = "".join(random_.choice(PIECES) for _ in range(random_.choice((1, 1, 1, 2, 6))))
            data = data[:start] + piece.encode("utf-8", "surrogatepass") + data[end:]
    return data


def any_options(random_: random.Random) -> ReadOptions:
    """What a user might say about the file; mostly only the mass accuracy, so that more is read."""
    if random_.random() < 0.7:
        return ReadOptions(mass_accuracy=MassAccuracy.UNIT)
    return ReadOptions(
        mass_accuracy=random_.choice((None, *MassAccuracy)),
        decimal=random_.choice((None, "point", "comma")),
        separator=random_.choice((None, "tab", "semicolon", "comma", "blank")),
        encoding=random_.choice((None, "utf-8", "cp1252", "utf-16", "shift_jis", "utf-32")),
        mz_from=random_.choice((None, 20.0)),
    )


def try_spectra(data: bytes, options: ReadOptions) -> None:
    """Read the bytes as spectra, then write and read again whatever was found."""
    found = read_spectra_from_bytes("fuzz.bin", data, options).spectra
    if [spectrum.index for spectrum in found] != list(range(1, len(found) + 1)) or not found:
        raise AssertionError("the spectra are not numbered from 1")
    text = write_jcamp([WritableSpectrum.of(spectrum) for spectrum in found])
    again = read_spectra_from_bytes("again.jdx", text.encode("ascii"))
    if [s.spectrum.content_hash for s in again.spectra] != [s.spectrum.content_hash for s in found]:
        raise AssertionError("what was written reads back differently")


def try_table(data: bytes, scratch: Path) -> None:
    """Read the bytes as a table, and its cells as numbers."""
    scratch.write_bytes(data)
    for row in read_table(scratch, COLUMNS, ()):
        for cell in row.cells.values():
            for read in (number_in_cell, whole_number_in_cell):
                try:
                    read(cell, "cell")
                except InvalidValueError as error:
                    if not error.advice:
                        raise AssertionError("a refusal without advice") from error


def try_case(run: Run, seed: str, data: bytes, attempt: Callable[[], None]) -> None:
    """Run one case and note what is not a plain result or refusal."""
    started = time.perf_counter()
    # A case that does not end at all stops the run and shows where it hangs.
    faulthandler.dump_traceback_later(20 * run.slow, exit=True)
    try:
        attempt()
        run.read += 1
    except InputFileError as error:
        run.refused += 1
        if not error.advice or not str(error).isprintable():
            run.note(seed, data, f"a refusal without advice or with stray signs: {error!a}")
    except Exception:  # noqa: BLE001 - every other exception is what is looked for
        run.note(seed, data, traceback.format_exc())
    finally:
        faulthandler.cancel_dump_traceback_later()
    taken = time.perf_counter() - started
    if taken > run.slow:
        run.note(f"{seed}-slow", data, f"{taken:.1f} s for {len(data)} bytes")


def fuzz(run: Run, seed: int, seconds: float, cases: int) -> int:
    """Try cases until time or number is used up; returns how many were tried."""
    golden = [path.read_bytes() for path in sorted(GOLDEN.iterdir()) if path.suffix != ".json"]
    makers = (generated_jcamp, generated_series, generated_text, generated_table)
    until = time.monotonic() + seconds
    number = 0
    with tempfile.TemporaryDirectory() as scratch:
        table = Path(scratch) / "fuzz.csv"
        while time.monotonic() < until and number < cases:
            number += 1
            random_ = random.Random(f"{seed}/{number}")
            maker = random_.choice(makers)
            seeds = [*golden, maker(random_)]
            data = seeds[-1] if random_.random() < 0.7 else random_.choice(seeds)
            data = mutated(random_, data, seeds)
            options = any_options(random_)
            name = f"{seed}-{number}"
            try_case(run, name, data, lambda data=data, options=options: try_spectra(data, options))  # type: ignore[misc]
            if maker is generated_table:
                try_case(run, f"{name}-table", data, lambda data=data: try_table(data, table))  # type: ignore[misc]
    return number


def main() -> int:
    """Read the options, run, and report."""
    parser = argparse.ArgumentParser(description="Feed damaged files to the readers and report what goes wrong.")
    parser.add_argument("--seconds", type=float, default=60.0, help="stop after this time (default 60)")
    parser.add_argument("--cases", type=int, default=sys.maxsize, help="stop after this number of cases")
    parser.add_argument("--seed", type=int, default=None, help="repeat a run (default: another one every time)")
    parser.add_argument("--slow", type=float, default=5.0, help="seconds that one case may take (default 5)")
    parser.add_argument("--folder", type=Path, default=Path("fuzz_findings"), help="where findings are saved")
    options = parser.parse_args()
    seed = options.seed if options.seed is not None else random.SystemRandom().randrange(2**32)
    print(f"seed {seed}", flush=True)
    run = Run(options.slow, options.folder)
    number = fuzz(run, seed, options.seconds, options.cases)
    print(f"{number} cases: {run.read} read, {run.refused} refused, {len(run.findings)} findings")
    if run.findings:
        print(f"saved to {options.folder}; repeat with --seed {seed}")
    return 1 if run.findings else 0


if __name__ == "__main__":
    raise SystemExit(main())
