"""A bad config is refused with exit status, file, line, key, what is allowed and what to do."""

import json
import os
import re
import subprocess
import sys
from pathlib import Path
from typing import NamedTuple

import pytest
from helpers import SMALL_JOB, call, job, toml

from doe.config.load import digest, from_record, load, resolved_json, seeded

FORM = re.compile(
    r"error: (?P<file>[^:\s]+)(:(?P<line>\d+))? ?(?P<key>[\w.-]+)?( = (?P<value>.*?))?: "
    r"(?P<problem>.*); allowed: (?P<allowed>.+); try: (?P<fix>.+)",
    re.DOTALL,
)


class Bad(NamedTuple):
    """One wrong edit of the small job: the text put in for another, and what must be said of it.

    The fault lies on the first line that starts with `at`, from the edit on, or from the top for
    a table's head; by default on the first line of `new`.
    """

    old: str
    new: str
    key: str
    words: tuple[str, ...]
    at: str | None = None
    status: int = 3


def new_table(text: str) -> tuple[str, str]:
    """An edit that puts a further table in front of the solver's."""
    return "[solver]", f"{text}\n[solver]"


WAVE, LEVELS, PIXELS = 'wavelength = "633 nm"', "levels = 8", "pixels = 32"
SHAPE, STEPS, INDEX = "shape = [3, 3]", "steps = 40", "index = 1.5"
PERIOD = 'period = "640 um"'
GRID = f'kind = "grid"\n{SHAPE}'
UNITS = ("nm", "um", "mm")

# The numbers in front are the rows of the list of bad inputs this project has to refuse.
BAD = {
    "12 typo": Bad("starts = 2", "strats = 2", "solver.strats", ("unknown key", "`starts`")),
    "13 unknown section": Bad(
        *new_table("[elemnt]\nx = 1"), "elemnt", ("`elemnt`", "beam", "material", "`element`")
    ),
    "13 unknown section unlike any": Bad(
        *new_table("[zzzz]\nx = 1"), "zzzz", ("beam", "element", "material", "plane", "target")
    ),
    "14 wrong section": Bad(
        LEVELS, f"{LEVELS}\n{WAVE}", "element.wavelength", ("[beam]",), at="wavelength"
    ),
    "15 bare number": Bad(WAVE, "wavelength = 633", "beam.wavelength", ('"1030 nm"', *UNITS)),
    "15 no unit": Bad(WAVE, 'wavelength = "633"', "beam.wavelength", ("unit", *UNITS)),
    "16 bool": Bad(WAVE, "wavelength = true", "beam.wavelength", ("true", "unit")),
    "17 nan": Bad(WAVE, "wavelength = nan", "beam.wavelength", ("nan", "unit")),
    "17 nan as text": Bad(WAVE, 'wavelength = "nan nm"', "beam.wavelength", ("not a number",)),
    "18 inf": Bad(WAVE, "wavelength = inf", "beam.wavelength", ("inf", "unit")),
    "18 too large": Bad(WAVE, 'wavelength = "1e999 nm"', "beam.wavelength", ("finite",)),
    "19 zero": Bad(WAVE, 'wavelength = "0 nm"', "beam.wavelength", ("above 0",)),
    "20 negative": Bad(WAVE, 'wavelength = "-633 nm"', "beam.wavelength", ("above 0",)),
    "21 metres": Bad(WAVE, 'wavelength = "633 m"', "beam.wavelength", ("outside", '"633 nm"')),
    "21 nanometres": Bad(WAVE, 'wavelength = "6.33e-7 nm"', "beam.wavelength", ('"6.33e-7 m"',)),
    "22 unknown unit": Bad(WAVE, 'wavelength = "633 nmm"', "beam.wavelength", ("nmm", *UNITS)),
    "22 unfitting unit": Bad(WAVE, 'wavelength = "633 deg"', "beam.wavelength", ("deg", *UNITS)),
    "23 pixel pitch 0": Bad(PERIOD, 'period = "0 um"', "element.period", ("above 0",)),
    "23 pixel pitch negative": Bad(PERIOD, 'period = "-640 um"', "element.period", ("above 0",)),
    "27 no pixels": Bad(PIXELS, "pixels = 0", "element.pixels", ("greater than or equal to 1",)),
    "27 negative pixels": Bad(PIXELS, "pixels = -32", "element.pixels", ("greater than", "1")),
    "27 one pixel": Bad(PIXELS, "pixels = 1", "element.pixels", ("8 or more", "[1, N]")),
    "27 few pixels": Bad(PIXELS, "pixels = [4, 32]", "element.pixels", ("8 or more",)),
    "27 three axes": Bad(PIXELS, "pixels = [8, 8, 8]", "element.pixels", ("[y, x]",)),
    "28 half a pixel": Bad(PIXELS, "pixels = 512.5", "element.pixels", ("whole number",)),
    "29 huge grid": Bad(
        PIXELS, "pixels = 1000000000", "element.pixels", ("GB", "budget", "at most"), status=7
    ),
    "31 order beyond the field": Bad(
        SHAPE, "orders_y = [0]\norders_x = [0, 20]", "target",
        ("20", "32 pixels", "15.83 mrad"), "[target",
    ),
    "31 angle beyond the field": Bad(
        GRID,
        'kind = "orders"\norders = [[0, 0], [-17, 3]]',
        "target",
        ("-17", "along y", "15.83 mrad"),  # asin(32 / 2 * 633e-9 / 640e-6), by hand
        "[target",
    ),
    "31 no wave goes there": Bad(
        f'{PERIOD}\n{PIXELS}\n{LEVELS}\naperture = "10 mm"\n[material]\n{INDEX}\n'
        f'[plane]\nkind = "angles"\n[target]\n{GRID}',
        f'period = "3 um"\n{PIXELS}\n{LEVELS}\naperture = "10 mm"\n[material]\n{INDEX}\n'
        '[plane]\nkind = "angles"\n[target]\nkind = "orders"\norders = [[0, 0], [4, 4]]',
        "target",
        ("[4, 4]", "propagate"),
        "[target",
    ),
    "32 Nyquist": Bad(
        SHAPE, "orders_y = [0]\norders_x = [0, 16]", "target", ("16", "Nyquist"), "[target"
    ),
    "33 coincide": Bad(
        GRID, 'kind = "orders"\norders = [[1, 2], [0, 0], [1, 2]]', "target", ("[1, 2]",), "[target"
    ),
    "35 no orders": Bad(GRID, 'kind = "orders"\norders = []', "target", ("0 spots",), "orders"),
    "35 empty axis": Bad(SHAPE, "orders_y = [0]\norders_x = []", "target", ("empty",), "orders_x"),
    "35 no weight": Bad(
        SHAPE, f"{SHAPE}\nweights = {[0] * 9}", "target.weights", ("no power",), "weights"
    ),
    "35 nothing left": Bad(
        SHAPE, 'shape = [1, 1]\nzero_order = "unwanted"', "target", ("no power",), "[target"
    ),
    "36 negative weight": Bad(
        SHAPE, f"{SHAPE}\nweights = [1, 1, -2, 1, 1, 1, 1, 1, 1]", "target.weights",
        ("weight 2", "-2"), "weights",
    ),
    "36 nan weight": Bad(
        SHAPE, f"{SHAPE}\nweights = [1, nan, 1, 1, 1, 1, 1, 1, 1]", "target.weights",
        ("weight 1", "nan"), "weights",
    ),
    "37 share without %": Bad(
        *new_table('[limits]\nefficiency = ">= 95"'), "limits.efficiency",
        ("%", '">= 95 %"', "100 %"), "efficiency",
    ),
    "37 share above 100 %": Bad(
        *new_table('[limits]\nefficiency = ">= 950 %"'), "limits.efficiency",
        ("0 % to 100 %",), "efficiency",
    ),
    "37 no comparison": Bad(
        *new_table('[limits]\nuniformity_error = "1 %"'), "limits.uniformity_error",
        ("<=", ">="), "uniformity_error",
    ),
    "38 few weights": Bad(
        SHAPE, f"{SHAPE}\nweights = [1, 2]", "target.weights", ("2 weights", "9 spots"), "weights"
    ),
    "39 very many spots": Bad(SHAPE, "shape = [3163, 3163]", "target.shape", ("10004569", "20000")),
    "41 feature above half the period": Bad(
        *new_table('[process]\nmin_feature = "400 um"'), "process.min_feature",
        ("400 um", "half", "320 um"), "min_feature",
    ),
    "41 feature above the period": Bad(
        *new_table('[process]\nmin_feature = "1 um"\nmin_gap = "1 mm"'), "process.min_gap",
        ("1 mm", "half", "320 um"), "min_gap",
    ),
    "44 one level": Bad(LEVELS, "levels = 1", "element.levels", ("2 to 256", "0")),
    "44 negative levels": Bad(LEVELS, "levels = -8", "element.levels", ("2 to 256",)),
    "44 levels and a half": Bad(LEVELS, "levels = 2.5", "element.levels", ("whole number",)),
    "44 bool levels": Bad(LEVELS, "levels = false", "element.levels", ("whole number",)),
    "45 six levels": Bad(LEVELS, "levels = 6", "element.levels", ("2^M", "4 or 8")),
    "47 65536 levels": Bad(LEVELS, "levels = 65536", "element.levels", ("byte", "256")),
    "48 index 1": Bad(INDEX, "index = 1.0", "material.index", ("etch depth", "above 1")),
    "48 index below 1": Bad(INDEX, "index = 0.9", "material.index", ("etch depth", "above 1")),
    "48 index nan": Bad(INDEX, "index = nan", "material.index", ("etch depth",)),
    "48 complex index": Bad(INDEX, 'index = "1.5+0.1i"', "material.index", ("number",)),
    "50 no steps": Bad(STEPS, "steps = 0", "solver.steps", ("greater than or equal to 1",)),
    "50 negative steps": Bad(STEPS, "steps = -5", "solver.steps", ("greater than",)),
    "50 steps as float": Bad(STEPS, "steps = 1e6", "solver.steps", ("whole number",)),
    "51 learning rate 0": Bad(
        STEPS, f"{STEPS}\n[solver.gradient]\nlearning_rate = 0.0",
        "solver.gradient.learning_rate", ("greater than 0",), "learning_rate",
    ),
    "51 learning rate nan": Bad(
        STEPS, f"{STEPS}\n[solver.gradient]\nlearning_rate = nan",
        "solver.gradient.learning_rate", ("nan",), "learning_rate",
    ),
    "51 learning rate 1e30": Bad(
        STEPS, f"{STEPS}\n[solver.gradient]\nlearning_rate = 1e30",
        "solver.gradient.learning_rate", ("less than or equal to 100",), "learning_rate",
    ),
    "52 seed negative": Bad(STEPS, f"{STEPS}\n[run]\nseed = -1", "run.seed", ("0",), "seed"),
    "52 seed 2^80": Bad(
        STEPS, f"{STEPS}\n[run]\nseed = {2**80}", "run.seed", ("4294967295",), "seed"
    ),
    "52 seed text": Bad(
        STEPS, f'{STEPS}\n[run]\nseed = "one"', "run.seed", ("whole number",), "seed"
    ),
    "58 escape code": Bad('"Test bench"', '"Test \\u001b[31m"', "title", ("printable",), "title"),
    "58 newline": Bad('"Test bench"', '"Test\\nbench"', "title", ("printable",), "title"),
    "58 right to left": Bad('"Test bench"', '"Test \\u202e x"', "title", ("printable",), "title"),
    "58 no title": Bad('"Test bench"', '""', "title", ("1 to 120",), "title"),
    "59 angles with a lens": Bad(
        '[plane]\nkind = "angles"', '[plane]\nkind = "angles"\nfocal_length = "100 mm"',
        "plane.focal_length", ("contradicts", "remove it"), "focal_length",
    ),
    "59 lens without length": Bad(
        '[plane]\nkind = "angles"', '[plane]\nkind = "lens"', "plane.focal_length",
        ("focal length", "100 mm"), "[plane",
    ),
    "59 period against pitch": Bad(
        SHAPE, f'{SHAPE}\nangular_pitch = "1 mrad"', "element.period", ("633", "remove"), "period"
    ),
    "59 pitch without lens": Bad(
        SHAPE, f'{SHAPE}\npitch = "100 um"', "target.pitch", ("angular_pitch",), "pitch"
    ),
    "59 shape and orders": Bad(
        SHAPE, f"{SHAPE}\norders_x = [0]", "target.shape", ("orders_x", "one of the two"), "shape"
    ),
    "59 no period at all": Bad(f"{PERIOD}\n", "", "element.period", ("add it",), "[element"),
    "59 name and index": Bad(
        INDEX, f'{INDEX}\nname = "fused silica"', "material", ("one of the two",), "[material"
    ),
    "59 limits that leave no room": Bad(
        *new_table('[limits]\nzero_order_to_mean = [">= 1.2", "<= 0.9"]'),
        "limits.zero_order_to_mean", ("contradict",), "zero_order_to_mean",
    ),
    "misspelt glass": Bad(
        INDEX, 'name = "fuzed silica"', "material.name", ("not known", '"fused silica"')
    ),
    "misspelt choice": Bad(
        '[plane]\nkind = "angles"', '[plane]\nkind = "angels"', "plane.kind", ('"angles"',), "kind"
    ),
    "misspelt target": Bad(GRID, 'kind = "gird"', "target.kind", ("orders", '"grid"')),
    "target without kind": Bad(GRID, SHAPE, "target", ("kind", "grid", "orders"), "[target"),
    "misspelt method": Bad(
        'methods = ["gradient"]', 'methods = ["gradiant"]', "solver.methods",
        ("weighted", '"gradient"'),
    ),
    "no method": Bad('methods = ["gradient"]', "methods = []", "solver.methods", ("empty",)),
    "angle between orders": Bad(
        GRID, 'kind = "angles"\nangles = [["0 deg", "0.1 deg"]]', "target.angles",
        # By hand: sin(0.1 deg) 640e-6 / 633e-9 = 1.765, and order 2 lies at 1.978 mrad.
        ("1.765", "between", "1.978"), "angles",
    ),
    "a key left out": Bad(f"{LEVELS}\n", "", "element.levels", ("required", "[element]"), "[elem"),
    "a table that is none": Bad(
        'title = "Test bench"', 'title = "Test bench"\nrun = 3', "run", ("3",), "run"
    ),
}  # fmt: skip


def bad_config(case: Bad) -> tuple[Path, int]:
    """The edited small job, and the number of the line the fault lies on."""
    text = toml(SMALL_JOB)
    place = text.index(case.old)
    text = text[:place] + case.new + text[place + len(case.old) :]
    path = Path("bad.toml")
    path.write_text(text)
    start = case.at or case.new.splitlines()[0]
    first = 0 if start.startswith("[") or case.at == "period" else text[:place].count("\n")
    lines = text.splitlines()
    return path, next(i for i in range(first, len(lines)) if lines[i].startswith(start)) + 1


@pytest.mark.parametrize("name", BAD)
def test_a_bad_value_is_told_with_line_key_allowed_and_fix(name, monkeypatch, capsys):
    case = BAD[name]
    path, line = bad_config(case)
    status, out, err = call(monkeypatch, capsys, "check", path)
    assert status == case.status, err
    assert out == ""
    assert "Traceback" not in err
    told = [FORM.fullmatch(part) for part in re.split(r"\n(?=error: )", err.rstrip("\n"))]
    assert all(told), f"not in the form of an error message: {err}"
    hits = [m for m in told if (m["key"] or "").startswith(case.key)]
    assert hits, f"{case.key} is not named: {err}"
    assert (hits[0]["file"], hits[0]["line"]) == ("bad.toml", str(line)), err
    for word in case.words:
        assert word in err, f"{word!r} is not said: {err}"


@pytest.mark.parametrize("name", BAD)
def test_one_wrong_value_brings_no_faults_elsewhere(name):
    case = BAD[name]
    path, _ = bad_config(case)
    with pytest.raises(Exception, match="allowed") as caught:
        load(path)
    assert len({(fault.line, fault.key) for fault in caught.value.faults}) == 1, str(caught.value)


@pytest.mark.parametrize("name", ["27 no pixels", "27 negative pixels", "28 half a pixel"])
def test_a_value_that_stands_for_a_pair_is_named_by_its_own_key(name):
    path, _ = bad_config(BAD[name])
    with pytest.raises(Exception, match="allowed") as caught:
        load(path)
    assert caught.value.faults[0].key == "element.pixels"


def test_four_faults_are_told_at_once(monkeypatch, capsys):
    text = toml(SMALL_JOB).replace(WAVE, "wavelength = 633").replace(LEVELS, "levels = 6")
    text = text.replace("starts = 2", "strats = 2") + "[run]\nseed = -1\n"
    Path("four.toml").write_text(text)
    status, _, err = call(monkeypatch, capsys, "check", "four.toml")
    assert status == 3
    lines = text.splitlines()
    for number, key in (
        (lines.index("wavelength = 633") + 1, "beam.wavelength"),
        (lines.index("levels = 6") + 1, "element.levels"),
        (lines.index("seed = -1") + 1, "run.seed"),
        (lines.index("strats = 2") + 1, "solver.strats"),
    ):
        assert f"error: four.toml:{number} {key}" in err
    assert err.count("error: ") == 4


def test_a_fault_of_the_index_is_told_beside_one_of_the_beam(monkeypatch, capsys):
    text = toml(SMALL_JOB).replace(WAVE, "wavelength = 633").replace(INDEX, "index = 0.5")
    Path("two.toml").write_text(text)
    status, _, err = call(monkeypatch, capsys, "check", "two.toml")
    assert status == 3
    assert "beam.wavelength" in err
    assert "material.index" in err


def test_a_glass_outside_its_fit_names_the_range_and_the_way_out(monkeypatch, capsys):
    path = job(material={"name": "fused silica"}, beam__wavelength="10.6 um")
    err = refusal(monkeypatch, capsys, path)
    assert "beam.wavelength" in err
    for words in ("10.6 um", "3.71 um", "`index`"):
        assert words in err


def test_an_empty_config_lists_what_is_missing(monkeypatch, capsys):
    Path("empty.toml").write_text("")
    status, _, err = call(monkeypatch, capsys, "check", "empty.toml")
    assert status == 3
    for name in ("title", "beam", "element", "material", "plane", "target", "solver"):
        assert f"empty.toml {name}: " in err


def test_errors_as_json_have_the_stated_keys(monkeypatch, capsys):
    path, line = bad_config(BAD["45 six levels"])
    status, out, err = call(monkeypatch, capsys, "check", path, "--json")
    told = json.loads(out)
    assert (status, err) == (3, "")
    assert (told["status"], told["exit"]) == ("error", 3)
    (fault,) = told["errors"]
    assert set(fault) == {"file", "line", "key", "value", "problem", "allowed", "fix"}
    place = [fault[name] for name in ("file", "line", "key", "value")]
    assert place == ["bad.toml", line, "element.levels", "6"]
    assert "4 or 8" in fault["fix"]


def refusal(monkeypatch, capsys, path: object) -> str:
    """The message for a file that is no config; the exit status is 3."""
    status, out, err = call(monkeypatch, capsys, "check", path)
    assert (status, out) == (3, "")
    assert "Traceback" not in err
    assert "; allowed: " in err
    assert "; try: " in err
    return err


def test_a_missing_file_is_named(monkeypatch, capsys):
    err = refusal(monkeypatch, capsys, "nowhere.toml")
    assert err.startswith("error: nowhere.toml: ")
    assert "no such file" in err


@pytest.mark.parametrize("kind", ["folder", "device", "fifo"])
def test_only_a_regular_file_is_read(kind, monkeypatch, capsys):
    path = "/dev/zero" if kind == "device" else "odd.toml"
    if kind == "folder":
        os.mkdir(path)
    elif kind == "fifo":
        os.mkfifo(path)  # opening it for reading would wait for ever
    err = refusal(monkeypatch, capsys, path)
    assert f"error: {path}: this is not a regular file" in err


def test_a_fifo_as_process_file_does_not_hang_either(monkeypatch, capsys):
    os.mkfifo("process.toml")
    err = refusal(monkeypatch, capsys, job(process__file="process.toml"))
    assert "process.toml: this is not a regular file" in err


def test_what_is_not_utf8_is_told_with_its_place(monkeypatch, capsys):
    Path("latin.toml").write_bytes(b'title = "caf\xe9"\n')
    assert "byte 12" in refusal(monkeypatch, capsys, "latin.toml")


def test_a_byte_order_mark_is_accepted():
    text = job().read_text()
    Path("marked.toml").write_bytes(b"\xef\xbb\xbf" + text.encode())
    config, kept = load(Path("marked.toml"))
    assert config.title == "Test bench"
    assert kept == text


def test_a_syntax_error_shows_the_line_with_a_caret(monkeypatch, capsys):
    path = Path("bad.toml")
    path.write_text(toml(SMALL_JOB).replace(LEVELS, "levels = = 8"))
    line = path.read_text().splitlines().index("levels = = 8") + 1
    err = refusal(monkeypatch, capsys, path)
    assert f"bad.toml:{line}: " in err
    shown = err.splitlines()
    place = next(i for i, text in enumerate(shown) if text.strip() == "levels = = 8")
    # The second sign of equality is the one that cannot stand there.
    assert shown[place + 1].index("^") == shown[place].rindex("=")


def test_a_double_key_is_told_with_both_lines(monkeypatch, capsys):
    path = Path("bad.toml")
    path.write_text(toml(SMALL_JOB).replace(LEVELS, f"{LEVELS}\n{PIXELS}"))
    lines = [i for i, text in enumerate(path.read_text().splitlines(), 1) if text == PIXELS]
    err = refusal(monkeypatch, capsys, path)
    assert f"bad.toml:{lines[1]} element.pixels" in err
    assert f"lines {lines[0]} and {lines[1]}" in err


HOSTILE = {
    "8 nested arrays": ("x = " + "[" * 100_000 + "]" * 100_000, "deeper than 16"),
    "8 nested tables": ("x = " + "{a = " * 5000 + "1" + "}" * 5000, "deeper than 16"),
    "9 dotted key": (".".join(["a"] * 20_000) + " = 1", "deeper than 16"),
    "9 dotted header": ("[" + ".".join(["a"] * 20_000) + "]", "deeper than 16"),
    "10 large file": ("#" * 300_000, "256 KB"),
    "11 long number": ("x = " + "9" * 5000, "number"),
    "binary zeros": ("\0" * 1000, "syntax"),
    "long word": ("a" * 250_000, "syntax"),
    "many spaces": ("x = 1\n" + " " * 100_000 + "\n", "title"),
    "header of spaces": ("[" + " " * 100_000, "syntax"),
    "dots in a value": ("x = " + "a." * 60_000, "syntax"),
}


@pytest.mark.parametrize("name", HOSTILE)
def test_hostile_text_is_refused_within_seconds(name):
    text, words = HOSTILE[name]
    Path("hostile.toml").write_text(text)
    command = [sys.executable, "-m", "doe", "check", "hostile.toml"]
    run = subprocess.run(command, capture_output=True, text=True, timeout=5, check=False)
    assert run.returncode == 3, run.stderr[-500:]
    assert words in run.stderr
    assert "Traceback" not in run.stderr
    assert len(run.stderr) < 10_000 + len(text) // 2


def test_a_fault_in_a_process_file_names_that_file_and_line(monkeypatch, capsys):
    Path("shop.toml").write_text('# our shop\nmin_feature = "1 um"\noverlay = "5 deg"\n')
    err = refusal(monkeypatch, capsys, job(process__file="shop.toml"))
    assert "error: shop.toml:3 process.overlay" in err
    assert '"5 deg"' in err


def test_an_unknown_key_in_a_process_file_names_the_nearest(monkeypatch, capsys):
    Path("shop.toml").write_text('min_featur = "1 um"\n')
    err = refusal(monkeypatch, capsys, job(process__file="shop.toml"))
    assert "error: shop.toml:1 process.min_featur" in err
    assert "`min_feature`" in err


def test_a_process_rule_that_does_not_fit_the_job_names_the_process_file(monkeypatch, capsys):
    Path("shop.toml").write_text('# our shop\nmin_feature = "400 um"\n')
    err = refusal(monkeypatch, capsys, job(process__file="shop.toml"))
    assert "shop.toml:2 process.min_feature" in err


def test_a_missing_process_file_is_named(monkeypatch, capsys):
    err = refusal(monkeypatch, capsys, job(process__file="nowhere.toml"))
    assert "nowhere.toml: there is no such file" in err


def test_inline_process_values_stand_above_those_of_the_file():
    Path("shop.toml").write_text('min_feature = "1 um"\noverlay = "90 nm"\n')
    path = job(process__file="shop.toml", process__overlay="50 nm")
    process = load(path)[0].process
    assert (process.min_feature, process.overlay) == (1e-6, 5e-8)
    assert process.min_gap == process.min_feature
    assert process.file is None


JOBS = {
    "grid": {},
    "lens": {
        "plane__kind": "lens",
        "plane__focal_length": "100 mm",
        "target__pitch": ["98.90625 um", "98.90625 um"],
        "element__period": None,
        "limits": {"position_error": "<= 1 um", "zero_order_to_mean": [">= 0.8", "<= 120 %"]},
    },
    "orders": {"target": {"kind": "orders", "orders": [[0, 1], [2, -3]], "weights": [1, 2.5]}},
    "angles": {"target": {"kind": "angles", "angles": [["0 deg", "-0.0566684 deg"]]}},
    "line": {"element__pixels": [1, 64], "target": {"kind": "grid", "orders_x": [-1, 0, 1]}},
    "process": {
        "process": {"min_feature": "1 um", "overlay": "100 nm", "etch_error": "2 %"},
        "material": {"name": "fused silica"},
        "run": {"seed": 7},
        "solver": {"methods": ["weighted", "gerchberg-saxton"], "starts": 3, "steps": 5},
    },
}


@pytest.mark.parametrize("name", JOBS)
def test_a_config_comes_back_from_its_record_the_same(name):
    config, _ = load(job(**JOBS[name]))
    again = from_record(resolved_json(config))
    assert again == config
    assert digest(again) == digest(config)


def test_made_limits_come_back_too():
    path = job(limits={"efficiency": ">= 80 %"})
    path.write_text(path.read_text() + '[limits.made]\nrms_error = "<= 5 %"\nyield = "90 %"\n')
    config, _ = load(path)
    assert config.limits.made.share_of_parts == pytest.approx(0.9)
    assert from_record(resolved_json(config)) == config


def test_values_are_si_numbers():
    config, _ = load(job(**JOBS["process"]))
    assert config.beam.wavelength == 633e-9
    assert config.element.period == (640e-6, 640e-6)
    assert config.process.etch_error == 0.02
    # Malitson's fit gives 1.4570 at 633 nm, as every glass table lists it.
    assert config.material.index == pytest.approx(1.4570, abs=5e-5)


def test_a_period_left_out_follows_from_the_pitch():
    config, _ = load(job(**JOBS["lens"]))
    expected = 633e-9 * 0.1 / 98.90625e-6  # grating equation, f-sin mapping
    assert config.element.period == pytest.approx((expected, expected), rel=1e-12)


def test_layout_of_the_file_does_not_change_the_digest_and_the_seed_does():
    first, _ = load(job())
    path = Path("again.toml")
    path.write_text("# a comment\n" + job().read_text().replace('"640 um"', '"0.64 mm"'))
    second, _ = load(path)
    assert digest(first) == digest(second)
    assert digest(seeded(first, 2)) != digest(first)
    assert seeded(first, None) is first
