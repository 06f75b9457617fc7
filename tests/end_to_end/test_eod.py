"""`pricer eod` as a user types it: files in, a report out, an exit status."""

from __future__ import annotations

import json
import shutil
import subprocess
import sys

import openpyxl
import pandas as pd
import pytest
from typer.testing import CliRunner

from pricer.cli.app import app
from pricer.loader import write_tables
from tests.end_to_end.desk import BROKEN_MARKET, ROOT, SAMPLE, sample_maker, small_book, write_desk

TRADES = ("SMD-0001", "SMD-0008", "SMD-0024", "SMD-0041", "SMD-0045")
VALUATION_COLUMNS = {
    *("trade_id", "product", "currency", "value", "standard_error"),
    *("lower", "upper", "method", "status"),
}
FILES = {"report.xlsx", "valuations.csv", "deltas.csv", "cross_check.csv", "problems.csv", "run.json"}


def run(*arguments) -> object:
    return CliRunner().invoke(app, [str(argument) for argument in arguments])


@pytest.fixture(scope="module")
def desk(tmp_path_factory):
    return write_desk(tmp_path_factory.mktemp("desk"), *TRADES)


@pytest.fixture(scope="module")
def priced(desk, tmp_path_factory):
    out = tmp_path_factory.mktemp("run") / "report"
    result = run("eod", *desk, "--out", out, "--workers", 2)
    assert result.exit_code == 0, result.output
    return out, result


def test_a_run_writes_every_promised_file(priced):
    out, _ = priced
    assert {path.name for path in out.iterdir()} >= FILES


def test_the_plain_tables_have_the_promised_columns(priced):
    out, _ = priced
    valuations = pd.read_csv(out / "valuations.csv")
    assert not VALUATION_COLUMNS - set(valuations)
    assert tuple(valuations["trade_id"]) == TRADES
    assert (valuations["lower"] <= valuations["value"]).all()
    assert (valuations["value"] <= valuations["upper"]).all()
    assert set(["trade_id", "underlying", "delta", "standard_error"]) <= set(pd.read_csv(out / "deltas.csv"))


def test_the_closing_table_shows_totals_and_counts(priced):
    _, result = priced
    assert "total in EUR" in result.output
    assert "priced 5, not priced 0" in result.output
    assert "of which disagree: 0" in result.output


def test_the_run_file_holds_what_is_needed_to_repeat_it(priced, desk):
    import hashlib

    out, _ = priced
    facts = json.loads((out / "run.json").read_text())
    text = json.dumps(facts)
    for path in desk:
        assert hashlib.sha256(path.read_bytes()).hexdigest() in text
    assert facts["seed"] == 20_000
    assert facts["exit_status"] == 0


def test_workers_order_and_company_change_no_bit(priced, desk, tmp_path):
    """Same trades with one worker and in another order, then one trade alone."""
    out, _ = priced
    base = pd.read_csv(out / "valuations.csv", index_col="trade_id", dtype=str)
    deltas = pd.read_csv(out / "deltas.csv", index_col=["trade_id", "underlying"], dtype=str)

    write_tables(small_book(*reversed(TRADES)), tmp_path / "reversed.xlsx")
    assert run("eod", tmp_path / "reversed.xlsx", desk[1], "--out", tmp_path / "r", "--workers", 1).exit_code == 0
    pd.testing.assert_frame_equal(
        pd.read_csv(tmp_path / "r" / "valuations.csv", index_col="trade_id", dtype=str).loc[list(TRADES)], base
    )

    write_tables(small_book(TRADES[3]), tmp_path / "alone.xlsx")
    assert run("eod", tmp_path / "alone.xlsx", desk[1], "--out", tmp_path / "a").exit_code == 0
    alone = pd.read_csv(tmp_path / "a" / "valuations.csv", index_col="trade_id", dtype=str)
    pd.testing.assert_frame_equal(alone, base.loc[[TRADES[3]]])
    alone = pd.read_csv(tmp_path / "a" / "deltas.csv", index_col=["trade_id", "underlying"], dtype=str)
    pd.testing.assert_frame_equal(alone, deltas.loc[[TRADES[3]]])


def test_another_seed_gives_other_draws(priced, desk, tmp_path):
    out, _ = priced
    run("eod", *desk, "--out", tmp_path / "other", "--seed", 5)
    ours, theirs = (pd.read_csv(folder / "deltas.csv") for folder in (out, tmp_path / "other"))
    assert not (ours["delta"] == theirs["delta"]).all()


def test_csv_folders_give_the_same_numbers_as_workbooks(priced, tmp_path):
    out, _ = priced
    write_tables(small_book(*TRADES), tmp_path / "book")
    write_tables(sample_maker().market_tables(), tmp_path / "market")
    assert run("eod", tmp_path / "book", tmp_path / "market", "--out", tmp_path / "r").exit_code == 0
    assert (tmp_path / "r" / "valuations.csv").read_bytes() == (out / "valuations.csv").read_bytes()


def test_an_earlier_run_is_never_overwritten(priced, desk):
    out, _ = priced
    before = {path: path.read_bytes() for path in out.iterdir()}
    result = run("eod", *desk, "--out", out)
    assert result.exit_code == 2
    assert "never overwritten" in result.output
    assert {path: path.read_bytes() for path in out.iterdir()} == before


def test_runs_without_out_go_to_numbered_folders_of_reports(desk, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    write_tables(small_book(TRADES[0]), tmp_path / "night.xlsx")
    for _ in range(2):
        assert run("eod", "night.xlsx", desk[1], "--quiet").exit_code == 0
    assert sorted(path.name for path in (tmp_path / "reports").iterdir()) == ["2026-11-30-night", "2026-11-30-night-2"]


def test_quiet_prints_nothing_when_nothing_is_wrong(desk, tmp_path):
    result = run("eod", *desk, "--out", tmp_path / "r", "--quiet")
    assert result.output == ""


def test_one_bad_trade_is_listed_and_the_rest_is_priced(desk, tmp_path):
    tables = small_book(*TRADES)
    tables["trades"][1] = {**tables["trades"][1], "strike": "one"}
    tables["constituents"] = [
        {**row, "underlying": "KRUNTL"} if (row["trade_id"], row["underlying"]) == ("SMD-0024", "KRUNTEL") else row
        for row in tables["constituents"]
    ]
    write_tables(tables, tmp_path / "book.xlsx")
    result = run("eod", tmp_path / "book.xlsx", desk[1], "--out", tmp_path / "r")
    assert result.exit_code == 1
    assert "priced 3, not priced 2" in result.output
    assert 'column "strike"' in result.output
    assert "KRUNTEL" in result.output  # the nearest name is suggested
    valuations = pd.read_csv(tmp_path / "r" / "valuations.csv", index_col="trade_id")
    assert list(valuations.index[valuations["status"] == "not priced"]) == ["SMD-0008", "SMD-0024"]
    assert valuations.loc["SMD-0001", "value"] > 0
    problems = pd.read_csv(tmp_path / "r" / "problems.csv")
    assert {"SMD-0008", "SMD-0024"} <= set(problems["trade_id"].dropna())


def test_both_inputs_are_read_before_giving_up(tmp_path):
    result = run("eod", tmp_path / "no_book.xlsx", tmp_path / "no_market.xlsx")
    assert result.exit_code == 2
    assert "no_book.xlsx" in result.output
    assert "no_market.xlsx" in result.output


def test_a_text_that_looks_like_a_formula_comes_out_as_text(desk, tmp_path):
    tables = small_book(TRADES[0])
    tables["trades"] = [{**tables["trades"][0], "counterparty": '=HYPERLINK("x")', "strategy": "+hedge"}]
    write_tables(tables, tmp_path / "book.xlsx")
    assert run("eod", tmp_path / "book.xlsx", desk[1], "--out", tmp_path / "r").exit_code == 0
    workbook = openpyxl.load_workbook(tmp_path / "r" / "report.xlsx")
    cells = [cell for sheet in workbook for row in sheet.iter_rows() for cell in row]
    assert any("HYPERLINK" in str(cell.value) for cell in cells)
    assert all(cell.data_type != "f" for cell in cells)


def test_a_later_date_makes_the_options_shorter(desk, tmp_path):
    result = run("eod", *desk, "--out", tmp_path / "r", "--date", "2026-12-15")
    assert result.exit_code == 0, result.output
    assert json.loads((tmp_path / "r" / "run.json").read_text())["valuation_date"] == "2026-12-15"


@pytest.mark.parametrize(
    ("option", "value", "words"),
    [
        ("--date", "15/12/2026", "expected a date such as 2026-03-31"),
        ("--precision", "0", "expected a number above 0"),
        ("--workers", "0", "workers"),
        ("--seed", "-1", "seed"),
    ],
)
def test_a_wrong_option_is_explained(desk, option, value, words):
    result = run("eod", *desk, option, value)
    assert result.exit_code == 2
    assert words in result.output


def test_check_prices_nothing_and_reports_the_status(desk, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    result = run("check", *desk)
    assert result.exit_code == 0
    assert result.output.endswith("5 trades can be priced, 0 cannot.\n")
    assert not list(tmp_path.iterdir())


def test_check_shows_forwards_and_volatilities_before_anything_is_priced(desk):
    lines = run("check", *desk).output.splitlines()
    (orluma,) = [line.split() for line in lines if line.startswith("ORLUMA ")]
    assert orluma[:4] == ["ORLUMA", "84.2", "EUR", "2026-12-18"]
    assert len([line for line in lines if line.count(" %") == 2]) == 12


def test_with_strict_any_problem_makes_the_exit_status_1(desk, tmp_path):
    assert run("check", *desk, "--strict").exit_code == 0
    book, market = write_desk(tmp_path, TRADES[0])
    asked = ("--date", "2026-12-01")  # another date than the snapshot's: a warning
    quick = ("--one-model", "--precision", "50", "--quiet")
    assert run("check", book, market, *asked).exit_code == 0
    assert run("check", book, market, *asked, "--strict").exit_code == 1
    assert run("eod", book, market, *asked, *quick, "--out", tmp_path / "lenient").exit_code == 0
    assert run("eod", book, market, *asked, *quick, "--out", tmp_path / "strict", "--strict").exit_code == 1
    assert (tmp_path / "strict" / "report.xlsx").is_file()


def test_templates_are_written_and_say_where(tmp_path):
    result = run("template", tmp_path / "mine")
    assert result.exit_code == 0
    assert (tmp_path / "mine" / "book.xlsx").is_file()
    assert (tmp_path / "mine" / "market.xlsx").is_file()
    assert "book.xlsx" in result.output


def test_the_broken_sample_shows_the_refusals_and_prices_the_rest(tmp_path):
    quick = ("--one-model", "--precision", "50")
    result = run("eod", SAMPLE / "broken_book.xlsx", SAMPLE / "market.xlsx", *quick, "--out", tmp_path / "r")
    assert result.exit_code == 1
    valuations = pd.read_csv(tmp_path / "r" / "valuations.csv")
    refused = valuations[valuations["status"] == "not priced"]
    assert len(refused) >= 36
    assert len(valuations) == len(refused) + (valuations["status"] == "priced").sum()


@pytest.fixture(scope="module")
def written_again(tmp_path_factory):
    folder = tmp_path_factory.mktemp("sample")
    sample_maker().main(folder)
    return folder


@pytest.mark.parametrize("name", [SAMPLE.name, BROKEN_MARKET.name])
def test_the_sample_files_are_what_its_script_writes(written_again, name):
    ours, theirs = ROOT / "sample_books" / name, written_again / name
    files = [path.relative_to(ours) for path in sorted(ours.rglob("*.*"))]
    assert files == [path.relative_to(theirs) for path in sorted(theirs.rglob("*.*"))]
    for path in files:
        if path.suffix == ".csv":
            assert (ours / path).read_bytes() == (theirs / path).read_bytes(), path
        else:  # a workbook holds the time at which it was written
            assert cells(ours / path) == cells(theirs / path), path


def cells(path) -> dict[str, list]:
    workbook = openpyxl.load_workbook(path, read_only=True)
    found = {sheet.title: [tuple(row) for row in sheet.iter_rows(values_only=True)] for sheet in workbook}
    workbook.close()
    return found


def test_the_installed_command_answers(tmp_path):
    command = shutil.which("pricer", path=str(__import__("pathlib").Path(sys.executable).parent))
    assert command is not None
    shown = subprocess.run([command, "--help"], capture_output=True, text=True, check=True)
    for word in ("eod", "check", "template", "Exit status"):
        assert word in shown.stdout
