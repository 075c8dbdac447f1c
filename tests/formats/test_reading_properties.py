"""Whatever the bytes: a spectrum that is right, or one refusal."""

from __future__ import annotations

import time
from pathlib import Path
from typing import get_args

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from speclib.errors import InputFileError
from speclib.formats.reading import DecimalMark, ReadOptions, Separator, read_spectra_from_bytes
from speclib.model.spectrum import MAX_MZ, MassAccuracy, SourceFile

GOLDEN = Path(__file__).parent.parent / "golden" / "formats"
SEEDS = [path.read_bytes() for path in sorted(GOLDEN.iterdir()) if path.suffix != ".json"]
OPTIONS = st.builds(
    ReadOptions,
    mass_accuracy=st.none() | st.sampled_from(MassAccuracy),
    decimal=st.none() | st.sampled_from(get_args(DecimalMark)),
    separator=st.none() | st.sampled_from(get_args(Separator)),
    encoding=st.none() | st.sampled_from(["utf-8", "cp1252", "utf-16", "utf-16-be", "utf-32", "shift_jis", "latin-1"]),
    mz_from=st.none() | st.floats(0, 100),
    mz_to=st.none() | st.floats(101, 1000),
)
MEANINGFUL = """
43 100 57.05 1,234 0 -1 1e5 nan 1'000 ; , . : = # ## $$ ? ( ) + - " ##TITLE= ##END= ##NPOINTS=2 ##XFACTOR=1e999
##.RETENTIONTIME=1e400 ##.IONIZATIONMODE=EI+ ##XUNITS=M/Z (XY..XY) (X++(Y..Y)) ##PEAKTABLE=(XY..XY) m/z rt_s
##.ACQUISITIONRANGE=5,5 ##DATATYPE=MASSSPECTRUM ##DATATYPE=LINK #mz_from:9 #rt:1e999s #name:x sep=;
"""
PIECES = st.sampled_from(MEANINGFUL.split()) | st.sampled_from(
    [" ", "\n", "\t", "\r", "\n\n", "\u00a0", "\u2028", "\x85", "\ufeff", "\0"]
)


def outcome(name: str, data: bytes, options: ReadOptions) -> SourceFile | InputFileError:
    try:
        return read_spectra_from_bytes(name, data, options)
    except InputFileError as error:
        return error


def read_or_refuse(data: bytes, options: ReadOptions) -> None:
    found = outcome("any.bin", data, options)
    if isinstance(found, InputFileError):
        assert str(found).startswith("any.bin")
        assert found.advice
        assert str(found).isprintable()
    else:
        assert found.spectra
        assert [s.index for s in found.spectra] == list(range(1, len(found.spectra) + 1))


@settings(max_examples=300, deadline=None)
@given(st.binary(max_size=300), OPTIONS)
@example(b"\xff\xfe\x00", ReadOptions())
@example(b"\xff\xfe\x00\xd8\x00\x00", ReadOptions())
def test_any_bytes_are_read_or_refused_once(data: bytes, options: ReadOptions) -> None:
    read_or_refuse(data, options)


@settings(max_examples=300, deadline=None)
@given(st.text(max_size=200), OPTIONS)
def test_any_text_is_read_or_refused_once(text: str, options: ReadOptions) -> None:
    read_or_refuse(text.encode("utf-8", "surrogatepass"), options)


@settings(max_examples=600, deadline=None)
@given(st.lists(PIECES, max_size=40), OPTIONS)
def test_any_mix_of_meaningful_pieces_is_read_or_refused_once(pieces: list[str], options: ReadOptions) -> None:
    read_or_refuse("".join(pieces).encode(), options)


@settings(max_examples=300, deadline=None)
@given(st.sampled_from(SEEDS), st.data())
def test_any_damage_to_a_good_file_is_read_or_refused_once(seed: bytes, data: st.DataObject) -> None:
    start = data.draw(st.integers(0, len(seed)))
    end = data.draw(st.integers(start, len(seed)))
    patch = data.draw(st.binary(max_size=8) | PIECES.map(str.encode))
    read_or_refuse(seed[:start] + patch + seed[end:], ReadOptions())


MZ = st.floats(0, MAX_MZ, exclude_min=True)
INTENSITY = st.floats(min_value=0, max_value=1e300)
PEAKS = st.dictionaries(MZ, INTENSITY, min_size=1, max_size=20).filter(lambda peaks: max(peaks.values()) > 0)


@settings(deadline=None)
@given(PEAKS, st.sampled_from([("tab", "\t"), ("semicolon", ";"), ("blank", " "), ("comma", ",")]))
def test_any_peaks_written_with_points_read_back_exactly(
    peaks: dict[float, float], separator: tuple[Separator, str]
) -> None:
    text = "".join(f"{mz!r}{separator[1]}{intensity!r}\n" for mz, intensity in peaks.items())
    spectrum = read_spectra_from_bytes("x", text.encode(), ReadOptions(mass_accuracy=MassAccuracy.ACCURATE)).spectra[0]
    assert dict(zip(spectrum.spectrum.mz.tolist(), spectrum.spectrum.intensity.tolist(), strict=True)) == peaks


@settings(deadline=None)
@given(PEAKS, st.sampled_from(["\t", ";", " "]))
def test_any_peaks_written_with_decimal_commas_read_back_exactly_or_are_asked_about(
    peaks: dict[float, float], sign: str
) -> None:
    text = "".join(f"{mz!r}{sign}{intensity!r}\n" for mz, intensity in peaks.items()).replace(".", ",")
    accurate = MassAccuracy.ACCURATE
    said = read_spectra_from_bytes("x", text.encode(), ReadOptions(mass_accuracy=accurate, decimal="comma")).spectra[0]
    assert dict(zip(said.spectrum.mz.tolist(), said.spectrum.intensity.tolist(), strict=True)) == peaks
    found = outcome("x", text.encode(), ReadOptions(mass_accuracy=accurate))
    if isinstance(found, InputFileError):
        assert "--decimal comma" in found.advice
    else:
        assert found.spectra[0].spectrum == said.spectrum


@settings(deadline=None)
@given(PEAKS)
def test_any_peaks_of_a_jcamp_table_read_back_exactly(peaks: dict[float, float]) -> None:
    table = "".join(f"{mz!r}, {intensity!r}\n" for mz, intensity in peaks.items())
    head = f"##TITLE= a\n##DATA TYPE= MASS SPECTRUM\n##NPOINTS= {len(peaks)}\n##PEAK TABLE= (XY..XY)\n"
    options = ReadOptions(mass_accuracy=MassAccuracy.ACCURATE)
    spectrum = read_spectra_from_bytes("x", (head + table + "##END=").encode(), options).spectra[0].spectrum
    assert dict(zip(spectrum.mz.tolist(), spectrum.intensity.tolist(), strict=True)) == peaks


@pytest.mark.parametrize(
    "text",
    [
        "1" * 1_000_000,
        "1,234" * 200_000,
        "1 " * 500_000,
        "\t" * 1_000_000 + "x",
        "# " + "a" * 1_000_000,
        "#" * 1_000_000,
        "# rt_s: " + "1" * 1_000_000,
        "# mz_range: " + "1." * 500_000,
        "##TITLE= a\n##XUNITS= M/Z\n##PEAK TABLE= " + "(" * 1_000_000 + "\n##END=",
        "##TITLE= a\n##XUNITS= M/Z\n##PEAK TABLE= (XY..XY)\n" + ", " * 500_000 + "\n##END=",
        "##TITLE= a\n" * 50_000,
        "##TITLE= a\n##DATA TYPE= LINK\n" * 50_000,
        "m/z " * 250_000,
        "a" * 1_000_000 + "\n1 2",
        "1\n" * 1_000_000,
    ],
    ids=lambda text: text[:12].replace("\n", " "),
)
def test_a_megabyte_made_to_be_slow_is_settled_in_seconds(text: str) -> None:
    started = time.monotonic()
    read_or_refuse(text.encode(), ReadOptions())
    assert time.monotonic() - started < 10
