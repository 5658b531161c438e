from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

from passplan.inputs.ground import Site
from passplan.link import atmosphere, gas_cache
from passplan.link.atmosphere import gas_tables
from passplan.link.gas_cache import load_rows, save_rows

ROWS = {"one": (0.1, 0.2, 5.0, 1.7), "two": (0.3, 0.0, 4.9, 1.8)}
SITE = Site(name="Strand", latitude_deg=52.0, longitude_deg=4.0)


def test_rows_come_back_exactly(cache_home: Path) -> None:
    assert load_rows() == {}
    assert save_rows(ROWS)
    assert load_rows() == ROWS
    assert [path.name for path in (cache_home / "passplan").iterdir()] == ["gas.json"]


@pytest.mark.parametrize(
    "spoil",
    [
        lambda text: text[: len(text) // 2],
        lambda text: "",
        lambda text: "\x00\xff",
        lambda text: text.replace("0.1", "0.9"),
        lambda text: text.replace("format", "older format"),
        lambda text: "[]",
        lambda text: "null",
        lambda text: json.dumps({**json.loads(text), "rows": {"one": [1.0, "x", 2.0, 3.0]}}),
        lambda text: "[" * 100_000,
    ],
    ids=["truncated", "empty", "binary", "altered", "version", "list", "null", "no number", "nested"],
)
def test_a_spoilt_file_counts_as_empty_and_is_replaced(cache_home: Path, spoil: object) -> None:
    save_rows(ROWS)
    file = cache_home / "passplan" / "gas.json"
    assert callable(spoil)
    file.write_text(spoil(file.read_text()), encoding="latin-1")
    assert load_rows() == {}
    assert gas_tables([(SITE, 8_200.0)])["Strand", 8_200.0].oxygen_db > 0.0
    assert len(load_rows()) == 1


def test_rows_with_a_sound_digest_but_no_sense_count_as_none(cache_home: Path) -> None:
    rows = {"one": [0.1, 0.2, 5.0]}
    document = {"stamp": gas_cache._stamp(), "sha256": gas_cache._digest(rows), "rows": rows}
    (cache_home / "passplan").mkdir(parents=True)
    (cache_home / "passplan" / "gas.json").write_text(json.dumps(document))
    assert load_rows() == {}


def test_a_folder_that_cannot_be_written_does_not_stop_the_run(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    blocked = tmp_path / "a-file"
    blocked.write_text("in the way")
    monkeypatch.setenv("XDG_CACHE_HOME", str(blocked))
    assert not save_rows(ROWS)
    assert gas_tables([(SITE, 8_200.0)])["Strand", 8_200.0].oxygen_db > 0.0


def test_a_full_disk_leaves_no_half_written_file(cache_home: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(*_: object, **__: object) -> None:
        raise OSError("no space left on device")

    monkeypatch.setattr(json, "dump", full)
    assert not save_rows(ROWS)
    assert list((cache_home / "passplan").iterdir()) == []


def test_no_home_means_no_cache(monkeypatch: pytest.MonkeyPatch) -> None:
    def homeless(_cls: type[Path]) -> Path:
        raise RuntimeError("no home")

    monkeypatch.setenv("XDG_CACHE_HOME", "relative/is/ignored")
    monkeypatch.setattr(Path, "home", classmethod(homeless))
    assert gas_cache.cache_folder() is None
    assert load_rows() == {}
    assert not save_rows(ROWS)


def test_a_second_look_asks_the_package_for_nothing(monkeypatch: pytest.MonkeyPatch) -> None:
    first = gas_tables([(SITE, 8_200.0), (SITE, 2_050.0)])

    def refuse(*_: object) -> None:
        raise AssertionError("the cache should have answered")

    monkeypatch.setattr(atmosphere, "zenith_gas", refuse)
    assert gas_tables([(SITE, 8_200.0), (SITE, 2_050.0)]) == first


def test_a_warm_cache_never_imports_the_propagation_package() -> None:
    gas_tables([(SITE, 8_200.0)])
    program = (
        "import sys; from passplan.inputs.ground import Site; from passplan.link.atmosphere import gas_tables;"
        "gas_tables([(Site(name='Strand', latitude_deg=52.0, longitude_deg=4.0), 8_200.0)]);"
        "print('itur' in sys.modules)"
    )
    root = str(Path(gas_cache.__file__).parents[2])
    environment = {**os.environ, "PYTHONPATH": os.pathsep.join([root, os.environ.get("PYTHONPATH", "")])}
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True, env=environment)
    assert done.stdout.strip() == "False"
