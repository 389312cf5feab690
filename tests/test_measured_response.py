"""Measured responses: every way to write the file gives the same response, every mistake its line.

Reference for reading numbers: numpy.loadtxt. Quotes round fields follow RFC 4180 (from memory).
"""

from __future__ import annotations

import hashlib
import os
import tracemalloc
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from encircle.engine.declarations import MeasuredResponse
from encircle.engine.measured_response import MOST_BYTES, ResponseFileError, read_response

F = np.array([1.0, 2.5, 10.0, 40.0])
H = 3.0 / (1 + 1j * F / 4)
HEADS = {
    ("real", "imag"): (H.real, H.imag),
    ("magnitude", "phase_deg"): (np.abs(H), np.degrees(np.angle(H))),
    ("magnitude", "phase_rad"): (np.abs(H), np.angle(H)),
    ("magnitude_db", "phase_deg"): (20 * np.log10(np.abs(H)), np.degrees(np.angle(H))),
    ("magnitude_db", "phase_rad"): (20 * np.log10(np.abs(H)), np.angle(H)),
}
PLAIN = "frequency_hz,real,imag\n1,2,-3\n2,1,-1\n4,0.5,-0.25\n"


def read(text: str | bytes, folder: Path, **columns: str) -> MeasuredResponse:
    path = folder / "data.csv"
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return read_response(path, "data.csv", columns)


def attempt(text: bytes, folder: Path) -> MeasuredResponse | ResponseFileError:
    """What becomes of a file: a response or a refusal, and nothing else."""
    try:
        return read(text, folder)
    except ResponseFileError as error:
        return error


def refusal(text: str | bytes, folder: Path, **columns: str) -> str:
    """The sentence with which the file is refused."""
    with pytest.raises(ResponseFileError) as caught:
        read(text, folder, **columns)
    assert caught.value.sentence.isprintable()
    assert caught.value.code
    assert "`data.csv`" in caught.value.sentence
    return caught.value.sentence


def table(head: tuple[str, ...], columns: tuple[np.ndarray, ...], separator: str = ",", comma: bool = False) -> str:  # type: ignore[type-arg]
    rows = [separator.join(repr(float(value)) for value in row) for row in zip(*columns, strict=True)]
    body = "\n".join(rows)
    return separator.join(head) + "\n" + (body.replace(".", ",") if comma else body) + "\n"


@pytest.mark.parametrize("pair", HEADS)
def test_every_pair_of_columns_gives_the_same_response(pair: tuple[str, str], tmp_path: Path) -> None:
    found = read(table(("frequency_hz", *pair), (F, *HEADS[pair])), tmp_path)
    np.testing.assert_allclose(found.H, H, rtol=1e-14)
    np.testing.assert_allclose(found.omega, 2 * np.pi * F, rtol=1e-15)
    assert found.coherence is None


def test_frequencies_in_rad_per_second_stay_as_they_are(tmp_path: Path) -> None:
    found = read(table(("frequency_rad_s", "real", "imag"), (F, H.real, H.imag)), tmp_path)
    np.testing.assert_array_equal(found.omega, F)
    np.testing.assert_array_equal(found.H, H)


@pytest.mark.parametrize("separator", [",", ";", "\t", " ", "   ", " ; ", ", "])
def test_separators_are_found_out(separator: str, tmp_path: Path) -> None:
    found = read(table(("frequency_rad_s", "real", "imag"), (F, H.real, H.imag), separator), tmp_path)
    np.testing.assert_array_equal(found.H, H)


@pytest.mark.parametrize("separator", [";", "\t", " ", "; "])
def test_decimal_commas_where_the_separator_is_another(separator: str, tmp_path: Path) -> None:
    found = read(table(("frequency_rad_s", "real", "imag"), (F, H.real, H.imag), separator, comma=True), tmp_path)
    np.testing.assert_array_equal(found.omega, F)
    np.testing.assert_array_equal(found.H, H)


@pytest.mark.parametrize("end", ["\n", "\r\n", "\r"])
def test_line_ends_byte_order_mark_and_blank_lines(end: str, tmp_path: Path) -> None:
    text = "\ufeff# bench 4\n\n" + PLAIN + "\n   \n# last\n"
    found = read(text.replace("\n", end).encode(), tmp_path)
    assert found.H.tolist() == [2 - 3j, 1 - 1j, 0.5 - 0.25j]
    assert found.notes == ("bench 4", "last")


def test_notes_are_kept_harmless(tmp_path: Path) -> None:
    found = read("#\x1b]0;owned\x07 [bold]sweep\u202e\n" + PLAIN + "  # tail\there\n" + "# more\n" * 500, tmp_path)
    assert found.notes[:2] == (r"\x1b]0;owned\x07 [bold]sweep\u202e", "tail here")
    assert len(found.notes) == 100


def test_lines_are_sorted_by_frequency(tmp_path: Path) -> None:
    found = read("frequency_rad_s real imag coherence\n4 1 0 0.5\n1 2 0 0.25\n2 3 0 1\n", tmp_path)
    assert found.omega.tolist() == [1, 2, 4]
    assert found.H.tolist() == [2, 3, 1]
    assert found.coherence is not None
    assert found.coherence.tolist() == [0.25, 1, 0.5]


def test_the_digest_is_that_of_the_file(tmp_path: Path) -> None:
    found = read(PLAIN, tmp_path)
    assert found.sha256 == hashlib.sha256(PLAIN.encode()).hexdigest()
    assert found.file == "data.csv"


def test_results_cannot_be_changed(tmp_path: Path) -> None:
    found = read(PLAIN, tmp_path)
    with pytest.raises(ValueError, match="read-only"):
        found.H[0] = 0


# ---- columns ---------------------------------------------------------------------------------------------------------


def test_other_headers_are_mapped(tmp_path: Path) -> None:
    text = '"Freq [Hz]";"Mag, dB";Phase;Remark\n1,5;-6,0;-90;"fine; really"\n3;-12;-135;x\n'
    found = read(text, tmp_path, frequency_hz="Freq [Hz]", magnitude_db="Mag, dB", phase_deg="Phase")
    np.testing.assert_allclose(found.omega, 2 * np.pi * np.array([1.5, 3]))
    expected = 10 ** (np.array([-6, -12]) / 20) * np.exp(1j * np.radians([-90, -135]))
    np.testing.assert_allclose(found.H, expected, rtol=1e-14)


def test_a_column_may_be_mapped_and_the_others_stand_as_they_are(tmp_path: Path) -> None:
    found = read(PLAIN.replace("frequency_hz", "f"), tmp_path, frequency_hz="f")
    assert len(found.omega) == 3


def test_the_mapping_decides_between_several_responses(tmp_path: Path) -> None:
    text = "frequency_rad_s,real,imag,Mag,phase_deg\n1,1,0,5,0\n2,1,0,6,0\n"
    assert read(text, tmp_path).H.tolist() == [1, 1]
    assert read(text, tmp_path, magnitude="Mag").H.tolist() == [5, 6]


@pytest.mark.parametrize(
    ("head", "columns", "said"),
    [
        ("f,real,imag", {}, "no column `frequency_hz` or `frequency_rad_s`; its columns are `f`, `real` and `imag`"),
        ("frequency_hz,real,phase_deg", {}, "no columns `real` with `imag`"),
        ("frequency_hz,real,imag", {"coherence": "Coh"}, "no column `Coh` for `coherence`"),
        ("Freq,real,imag", {"frequency_hz": "Frq"}, "nearest known name is `Freq`"),
        ("frequency_hz,frequency_rad_s,real,imag", {}, "frequency more than once"),
        ("frequency_hz,real,imag,magnitude,phase_deg", {}, "response more than once"),
        ("frequency_hz,real,real,imag", {}, "names `real` twice"),
        ("frequency_hz,real,imag", {"real": "imag"}, "two purposes"),
        ("frequency_hz,real,imag,m", {"magnitude": "m"}, "`columns` maps `magnitude`, which is not needed"),
        ("1,2,3", {}, "a header row must name the columns"),
        ("1,2,3,4", {}, "must not start with `#`"),
        ('frequency_hz,"real,imag', {}, "quotes in this line do not match"),
    ],
)
def test_headers_that_cannot_be_used(head: str, columns: dict[str, str], said: str, tmp_path: Path) -> None:
    columns = {**columns, "imag": "imag"} if columns.get("real") == "imag" else columns
    row = ",".join("1" for _ in head.split(","))
    sentence = refusal(f"# note\n{head}\n{row}\n{row}\n", tmp_path, **columns)
    assert said in sentence
    assert "line 2" in sentence


# ---- mistakes and their lines ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("line", "said"),
    [
        ("2,1,-1,9", "4 fields where the header has 3"),
        ("2,1", "2 fields where the header has 3"),
        ("2;1;-1", "1 fields where the header has 3"),
        ("2,5,1,0,1,0", "decimal commas the separator must be another"),
        ("2,nan,1", "`real` is `nan`, which is no finite number"),
        ("2,NaN,1", "`real` is `NaN`"),
        ("2,1,inf", "`imag` is `inf`"),
        ("nan,1,1", "`frequency_hz` is `nan`"),
        ("2,,1", "`real` is ``"),
        ("2,1_0,1", "`real` is `1_0`"),
        ("2,0x10,1", "`real` is `0x10`"),
        ("2,1.0.0,1", "`real` is `1.0.0`"),
        ("2,1 0,1", "`real` is `1 0`"),
        ("2,\u0661,1", "`real` is"),
        ("2,\x1b[2J,1", r"`real` is `\x1b[2J`"),
        ("2,1e999,1", "`real` is too large"),
        ("1e308,1,1", "frequency is too large"),
        ("0,1,1", "frequency must be above 0"),
        ("-2,1,1", "frequency must be above 0"),
        ("1e-999,1,1", "frequency must be above 0"),
        ("1.0,5,5", "frequency of line 3 is given again"),
        ('2,"1,1', "quotes in this line do not match"),
    ],
)
def test_every_mistake_gives_its_line(line: str, said: str, tmp_path: Path) -> None:
    sentence = refusal(f"# a note\nfrequency_hz,real,imag\n1,2,-3\n\n{line}\n4,1,1\n", tmp_path)
    assert "line 5" in sentence
    assert said in sentence


def test_decimal_points_and_commas_may_not_be_mixed(tmp_path: Path) -> None:
    text = "frequency_hz;real;imag\n1,5;2;3\n2.5;1;1\n"
    assert "line 3: decimal points and decimal commas are mixed" in refusal(text, tmp_path)
    assert "mixed" in refusal("frequency_hz;real;imag\n1.234,5;2;3\n2;1;1\n", tmp_path)


def test_the_first_of_several_repeats_is_named(tmp_path: Path) -> None:
    text = "frequency_hz,real,imag\n1,1,1\n4,1,1\n4,1,1\n1,1,1\n"
    assert "line 4: the frequency of line 3 is given again" in refusal(text, tmp_path)
    assert "line 4: the frequency of line 2" in refusal(text.replace("4,1,1\n1,1,1\n", "1,1,1\n4,1,1\n"), tmp_path)


def test_a_magnitude_is_not_negative(tmp_path: Path) -> None:
    text = "frequency_hz,magnitude,phase_deg\n1,1,0\n2,-1,0\n"
    assert "line 3: `magnitude` must not be below 0" in refusal(text, tmp_path)
    assert "line 2: `magnitude_db` is too large" in refusal(
        "frequency_hz,magnitude_db,phase_deg\n1,9999,0\n2,1,0\n", tmp_path
    )


def test_coherence_lies_from_0_to_1(tmp_path: Path) -> None:
    text = "frequency_hz,real,imag,coherence\n1,1,0,1.00000012\n2,1,0,98.5\n"
    assert "line 3: `coherence` must lie from 0 to 1" in refusal(text, tmp_path)


@pytest.mark.parametrize("text", ["frequency_hz,real,imag\n", "frequency_hz,real,imag\n\n1,2,3\n# end\n"])
def test_two_lines_are_the_least(text: str, tmp_path: Path) -> None:
    assert "fewer than two lines" in refusal(text, tmp_path)
    assert f"line {3 if '1,2' in text else 1}:" in refusal(text, tmp_path)


@pytest.mark.parametrize("text", ["", "\n\n", "# only notes\n"])
def test_a_file_without_data_is_refused(text: str, tmp_path: Path) -> None:
    assert "holds no data" in refusal(text, tmp_path)


# ---- hostile files ---------------------------------------------------------------------------------------------------


def test_binary_and_foreign_encodings_are_refused_with_the_line(tmp_path: Path) -> None:
    assert "line 2 holds a zero byte" in refusal(b"frequency_hz,real,imag\n\x7fELF\x00\x00", tmp_path)
    assert "line 3 holds the byte 0xb0" in refusal(b"# a\n# b\n# 20 \xb0C\n1,2,3\n", tmp_path)
    assert "zero byte" in refusal(PLAIN.encode("utf-16"), tmp_path)


def test_missing_files_and_directories(tmp_path: Path) -> None:
    (tmp_path / "rotor_frf.csv").write_text(PLAIN)
    with pytest.raises(ResponseFileError, match=r"does not exist; .* `rotor_frf\.csv`"):
        read_response(tmp_path / "rotor_fr.csv", "rotor_fr.csv", {})
    with pytest.raises(ResponseFileError, match="does not exist"):
        read_response(tmp_path / "nowhere" / "x.csv", "nowhere/x.csv", {})
    with pytest.raises(ResponseFileError, match="does not exist"):
        read_response(tmp_path / "rotor_frf.csv" / "x.csv", "x.csv", {})
    with pytest.raises(ResponseFileError, match="is a directory"):
        read_response(tmp_path, ".", {})
    with pytest.raises(ResponseFileError, match="cannot be read"):
        read_response(tmp_path / ("x" * 5000), "xxx", {})


@pytest.mark.skipif(not hasattr(os, "mkfifo"), reason="this system has no named pipes")
def test_pipes_and_devices_are_refused_without_waiting(tmp_path: Path) -> None:
    os.mkfifo(tmp_path / "pipe")
    for path in (tmp_path / "pipe", Path("/dev/zero")):
        with pytest.raises(ResponseFileError, match="is no regular file"):
            read_response(path, "pipe", {})


def test_a_file_of_200_megabytes_is_refused_unread(tmp_path: Path) -> None:
    path = tmp_path / "huge.csv"
    with path.open("wb") as file:
        file.write(PLAIN.encode())
        file.truncate(200_000_000)
    tracemalloc.start()
    with pytest.raises(ResponseFileError, match=r"has 190\.7 MiB, and at most 32 MiB are read"):
        read_response(path, "huge.csv", {})
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert peak < 1_000_000
    assert MOST_BYTES == 32 * 2**20


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("," * 3_000_000, "more than 10000 characters"),
        ("frequency_hz,real,imag\n" + "1,1,1\n" * 500_001, "more than 500000 lines"),
        ("frequency_hz,real,imag" + ",x" * 2000 + "\n" + ("1," * 2002 + "1\n") * 2000, "4000000 fields are read"),
        ("x" * 9999 + "\n1\n2\n", "no column"),
    ],
)
def test_shapes_that_would_cost_much_memory_are_refused(text: str, said: str, tmp_path: Path) -> None:
    assert said in refusal(text, tmp_path)


@settings(max_examples=120, deadline=None)
@given(content=st.binary(max_size=200) | st.text(alphabet='1,;. \t\n#"xe-', max_size=200).map(str.encode))
def test_any_file_is_read_or_refused(content: bytes, tmp_path_factory: pytest.TempPathFactory) -> None:
    folder = tmp_path_factory.mktemp("any")
    for text in (content, b"frequency_hz,real,imag\n1,2,3\n" + content):
        found = attempt(text, folder)
        if isinstance(found, ResponseFileError):
            assert found.sentence.isprintable()
        else:
            assert len(found.omega) >= 2
            assert np.all(np.diff(found.omega) > 0)


def test_a_hundred_thousand_lines_are_read_exactly(tmp_path: Path) -> None:
    """Reference: numpy.loadtxt."""
    generator = np.random.default_rng(4)
    numbers = np.column_stack([np.geomspace(0.1, 1e4, 100_000), generator.normal(size=(100_000, 2))])
    path = tmp_path / "large.csv"
    with path.open("w") as file:
        file.write("frequency_rad_s,real,imag\n")
        np.savetxt(file, generator.permutation(numbers), delimiter=",", fmt="%.17g")
    found = read_response(path, "large.csv", {})
    expected = np.loadtxt(path, delimiter=",", skiprows=1)
    expected = expected[np.argsort(expected[:, 0])]
    np.testing.assert_array_equal(found.omega, expected[:, 0])
    np.testing.assert_array_equal(found.H, expected[:, 1] + 1j * expected[:, 2])
