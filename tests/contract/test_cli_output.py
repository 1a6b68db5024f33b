"""Where results go: streams, encodings, files, pipes; and the two doors for one document."""

from __future__ import annotations

import csv
import io
import json
import os
import subprocess
import sys
import threading
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[2]
DATA = ROOT / "scripts" / "demo_data"
LIBRARY = ["--library", "palewater-dyehouse", "-c", "hollin-yellow,bramble-red,tarn-blue"]
RUN = ["resolve", str(DATA / "vat-run.csv"), "--samples", str(DATA / "vat-run-samples.csv"), *LIBRARY, "-b", "offset,scatter"]
SINGLE = ["resolve", str(DATA / "single.csv"), *LIBRARY]

needs_posix = pytest.mark.skipif(os.name != "posix", reason="named pipes and modes of files are those of POSIX")


def tinctor(*arguments: str, stdin: bytes = b"", **environment: str) -> subprocess.CompletedProcess[bytes]:
    env = {**{k: v for k, v in os.environ.items() if k not in ("COLUMNS", "TINCTOR_LIBRARY", "TINCTOR_DEBUG")}, **environment}
    return subprocess.run([sys.executable, "-m", "tinctor", *arguments], input=stdin, capture_output=True, env=env, check=False)


@pytest.mark.parametrize(("encoding", "form"), [("ascii", "table"), ("cp1252", "table"), ("utf-16", "json"), ("ascii", "csv")])
def test_a_pipe_gets_utf_8_whatever_the_locale(encoding: str, form: str) -> None:
    usual = tinctor(*SINGLE, "-f", form)
    other = tinctor(*SINGLE, "-f", form, PYTHONIOENCODING=encoding)
    assert (usual.returncode, other.returncode) == (0, 0)
    assert other.stdout == usual.stdout
    assert other.stdout.decode("utf-8")


@pytest.mark.parametrize("changes", [[], ["--wavelengths-nm", "430,470,520,560,600,640"], ["-b", "none", "--unit", "ug/L"]])
def test_both_doors_print_the_same_document(changes: list[str]) -> None:
    request = tinctor(*SINGLE, *changes, "--request")
    direct, piped = tinctor(*SINGLE, *changes, "-f", "json"), tinctor("json", "resolve", stdin=request.stdout)
    assert (direct.returncode, piped.returncode) == (0, 0)
    assert direct.stdout == piped.stdout
    digest = json.loads(direct.stdout)["provenance"]["request_sha256"]
    other = tinctor(*SINGLE, *changes, "--coverage", "0.9", "-f", "json")
    assert json.loads(other.stdout)["provenance"]["request_sha256"] != digest


def test_csv_comes_back_as_the_numbers_of_the_document() -> None:
    rows = list(csv.DictReader(io.StringIO(tinctor(*RUN, "-f", "csv").stdout.decode(), newline="")))
    results = json.loads(tinctor(*RUN, "-f", "json").stdout)["results"]
    parts = [(result["id"], part) for result in results for part in result["components"]]
    assert len(rows) == len(parts) == 60
    for row, (sample, part) in zip(rows, parts, strict=True):
        assert (row["id"], row["component"], row["status"], row["unit"]) == (sample, part["name"], part["status"], part["unit"])
        for key in ("concentration", "unconstrained", "u", "decision_limit", "detection_limit"):
            assert float(row[key]) == part[key]
        assert [float(row["interval_low"]), float(row["interval_high"])] == part["interval"]


def test_strict_counts_a_flag_in_any_spectrum_and_keeps_the_data() -> None:
    usual, strict = tinctor(*RUN), tinctor(*RUN, "--strict")
    assert (usual.returncode, strict.returncode) == (0, 5)
    assert usual.stdout == strict.stdout != b""


@needs_posix
def test_a_reader_that_leaves_early_is_no_fault() -> None:
    command = f"{sys.executable} -m tinctor {' '.join(RUN)} -f json | head -c 20; echo ${{PIPESTATUS[0]}}"
    done = subprocess.run(["bash", "-c", command], capture_output=True, text=True, check=False)
    assert done.stdout == '{"schema": "resolve/' + "0\n"
    assert done.stderr == ""


@needs_posix
def test_a_full_disk_is_said_plainly() -> None:
    if not Path("/dev/full").exists():
        pytest.skip("there is no /dev/full here")
    with Path("/dev/full").open("w", encoding="utf-8") as full:
        done = subprocess.run([sys.executable, "-m", "tinctor", *SINGLE], stdout=full, stderr=subprocess.PIPE, check=False)
    assert done.returncode == 1
    assert done.stderr.decode().splitlines() == ["tinctor: standard output cannot be written: No space left on device"]


@needs_posix
def test_a_closed_standard_output_is_said_plainly() -> None:
    command = [sys.executable, "-m", "tinctor", *SINGLE]
    done = subprocess.run(["bash", "-c", '"$@" >&-', "bash", *command], capture_output=True, text=True, check=False)
    assert (done.returncode, done.stderr) == (1, "tinctor: there is no standard output to write to\n")


def test_a_folder_is_no_place_for_a_result(tmp_path: Path) -> None:
    done = tinctor(*SINGLE, "--output", str(tmp_path))
    assert (done.returncode, done.stdout) == (3, b"")
    assert f"cannot be written: it is a folder [at {tmp_path}]" in done.stderr.decode()
    assert list(tmp_path.iterdir()) == []


@needs_posix
def test_a_pipe_or_device_is_written_to_and_not_replaced(tmp_path: Path) -> None:
    pipe = tmp_path / "pipe"
    os.mkfifo(pipe)
    got: list[str] = []
    reader = threading.Thread(target=lambda: got.append(pipe.read_text(encoding="utf-8")), daemon=True)
    reader.start()
    done = tinctor(*SINGLE, "-f", "csv", "--output", str(pipe))
    reader.join(timeout=10)
    assert done.returncode == 0
    assert pipe.is_fifo()
    assert got
    assert got[0].startswith("id,component")


@needs_posix
def test_a_file_keeps_its_mode_and_a_link_stays_a_link(tmp_path: Path) -> None:
    kept = tmp_path / "kept.csv"
    kept.touch(mode=0o600)
    kept.chmod(0o600)
    link = tmp_path / "link.csv"
    link.symlink_to(kept)
    assert tinctor(*SINGLE, "-f", "csv", "--output", str(link)).returncode == 0
    assert link.is_symlink()
    assert kept.stat().st_mode & 0o777 == 0o600
    assert kept.read_text(encoding="utf-8").startswith("id,component")
    assert sorted(path.name for path in tmp_path.iterdir()) == ["kept.csv", "link.csv"]


def test_an_id_cannot_steer_the_terminal_and_stays_whole_in_the_data(tmp_path: Path) -> None:
    lines = (DATA / "single.csv").read_text(encoding="utf-8").splitlines()
    name = tmp_path / "s.csv"
    name.write_text("\n".join(["nm,\x1b[2Jgone", *lines[1:]]) + "\n", encoding="utf-8")
    table = tinctor("resolve", str(name), *LIBRARY)
    assert b"\x1b" not in table.stdout
    assert rb"\x1b[2Jgone" in table.stdout
    rows = list(csv.DictReader(io.StringIO(tinctor("resolve", str(name), *LIBRARY, "-f", "csv").stdout.decode())))
    assert rows[0]["id"] == "\x1b[2Jgone"
    refused = tinctor("resolve", str(name), *LIBRARY, "--wavelengths-nm", "450,600")
    assert refused.returncode == 4
    assert b"\x1b" not in refused.stderr


def test_a_caution_is_said_once_and_data_stay_alone_on_standard_output(tmp_path: Path) -> None:
    spectrum = tmp_path / "s.csv"
    spectrum.write_text(
        "nm,a,b\n" + "".join(f"{w},{0.2 + w / 9000},{0.1 + w / 9000}\n" for w in range(500, 601, 2)), encoding="utf-8"
    )
    blood = ["resolve", str(spectrum), "--library", "published", "-c", "oxyhaemoglobin"]
    for form in ("table", "json", "csv"):
        done = tinctor(*blood, "-f", form)
        assert done.returncode == 0
        assert done.stderr.decode().count("Not for diagnosis") == 1
    assert json.loads(tinctor(*blood, "-f", "json").stdout)["schema"] == "resolve/1"


def planted(folder: Path) -> dict[str, str]:
    """An environment in which running an operation fails in a way nobody foresaw."""
    (folder / "sitecustomize.py").write_text(
        "import tinctor.operations.registry as r\ndef boom(*a): raise ZeroDivisionError('planted')\nr.run_document = boom\n",
        encoding="utf-8",
    )
    return {"PYTHONPATH": str(folder)}


@pytest.mark.parametrize(("debug", "traceback"), [("0", False), ("", False), ("1", True)])
def test_a_traceback_is_shown_only_when_it_is_asked_for(tmp_path: Path, debug: str, traceback: bool) -> None:
    done = tinctor("json", "resolve", stdin=b"{}", TINCTOR_DEBUG=debug, **planted(tmp_path))
    assert (done.returncode, done.stdout) == (1, b"")
    said = done.stderr.decode()
    assert ("Traceback" in said) is traceback
    assert ("Please report it" in said) is not traceback


def test_the_list_of_collections_is_a_document_with_a_schema() -> None:
    document = json.loads(tinctor("library", "list", "published", "-f", "json").stdout)
    assert document["schema"] == "library-list/1"
    assert [collection["name"] for collection in document["collections"]] == ["published"]
