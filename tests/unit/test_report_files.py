from __future__ import annotations

import csv
import json
import math
import os
import subprocess
import sys
from dataclasses import replace
from datetime import date, timedelta

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from pricer.report import default_folder, folder, write_report
from pricer.report.folder import _write_csv
from pricer.report.frames import tables, valuations
from pricer.run.outcome import Verdict
from tests.unit.report_outcomes import empty, facts, outcome, valuation

CSV_FILES = {
    *("valuations.csv", "deltas.csv", "underlying_deltas.csv", "summaries.csv"),
    *("cross_check.csv", "problems.csv", "not_priced.csv", "refusal_causes.csv"),
    *("market_problems.csv", "surfaces.csv", "violations.csv", "calibration.csv", "curves.csv", "forwards.csv"),
    *("credit.csv", "funding.csv", "agreements.csv"),
    *("events.csv", "life.csv", "contracts.csv", "contract_dates.csv"),
}


def rows(path):
    with path.open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


@pytest.fixture(scope="module")
def run():
    return outcome()


@pytest.fixture(scope="module")
def written(run, tmp_path_factory):
    return write_report(run, tmp_path_factory.mktemp("reports") / "may")


def test_the_report_is_a_folder_with_a_workbook_plain_tables_and_the_facts(written):
    assert {path.name for path in written.iterdir()} == {"report.xlsx", "run.json", *CSV_FILES}


def test_nothing_else_is_left_beside_the_report(written):
    assert [path.name for path in written.parent.iterdir()] == ["may"]


def test_an_existing_folder_is_refused_in_words_and_left_alone(run, tmp_path):
    (tmp_path / "may").mkdir()
    with pytest.raises(FileExistsError, match=r"may exists, and a report is never overwritten. Name a folder that"):
        write_report(run, tmp_path / "may")
    assert list((tmp_path / "may").iterdir()) == []
    assert [path.name for path in tmp_path.iterdir()] == ["may"]


def test_an_existing_file_or_dangling_link_of_that_name_is_refused(run, tmp_path):
    (tmp_path / "file").write_text("mine")
    (tmp_path / "link").symlink_to(tmp_path / "nowhere")
    for name in ("file", "link"):
        with pytest.raises(FileExistsError):
            write_report(run, tmp_path / name)
    assert (tmp_path / "file").read_text() == "mine"


@pytest.mark.parametrize("error", [OSError("disk full"), KeyboardInterrupt(), ValueError("bad cell")])
def test_a_failure_half_way_leaves_nothing_behind(run, tmp_path, monkeypatch, error):
    seen = []

    def fail(outcome, frames, target):
        seen.extend(path.name for path in target.parent.iterdir())
        raise error

    monkeypatch.setattr(folder, "write_workbook", fail)
    with pytest.raises(type(error)):
        write_report(run, tmp_path / "new" / "parents" / "may")
    assert "valuations.csv" in seen  # it was half-way indeed
    assert list(tmp_path.iterdir()) == []


def test_a_folder_that_appears_meanwhile_is_not_touched(run, tmp_path, monkeypatch):
    def meanwhile(outcome, frames, target):
        target.write_bytes(b"")
        (tmp_path / "may").mkdir()

    monkeypatch.setattr(folder, "write_workbook", meanwhile)
    with pytest.raises(FileExistsError):
        write_report(run, tmp_path / "may")
    assert [path.name for path in tmp_path.iterdir()] == ["may"]
    assert list((tmp_path / "may").iterdir()) == []


def test_missing_parents_are_made(tmp_path):
    assert write_report(empty(), tmp_path / "reports" / "may") == tmp_path / "reports" / "may"
    assert (tmp_path / "reports" / "may" / "report.xlsx").exists()


def test_a_relative_folder_is_written_where_the_user_stands(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    assert write_report(empty(), folder.Path("may")) == tmp_path / "may"


@pytest.mark.skipif(os.name != "posix", reason="permissions of this kind exist on POSIX systems")
def test_the_folder_has_the_permissions_of_any_new_folder(written, tmp_path):
    (tmp_path / "plain").mkdir()
    assert written.stat().st_mode == (tmp_path / "plain").stat().st_mode


def test_two_runs_of_the_same_input_and_seed_give_the_same_plain_tables_to_the_last_bit(run, written, tmp_path):
    """The second run was slower, on another day and with other workers."""
    slower = replace(
        run,
        facts=facts(seconds=99.0, started=facts().started + timedelta(days=1), workers=1, timings=()),
        valuations=tuple(replace(v, seconds=2.0 * v.seconds) for v in run.valuations),
    )
    again = write_report(slower, tmp_path / "again")
    for name in CSV_FILES:
        assert (again / name).read_bytes() == (written / name).read_bytes(), name


def test_numbers_in_plain_tables_lose_nothing(run, written):
    found = rows(written / "valuations.csv")
    for row, source in zip(found, run.valuations, strict=False):
        assert float(row["value"]) == source.value
        assert float(row["upper"]) == source.upper
        assert date.fromisoformat(row["expiry_date"]) == source.expiry_date
        assert row["paths"] == str(source.paths)


@given(st.lists(st.floats(allow_nan=False, allow_infinity=False), min_size=1, max_size=20))
@settings(deadline=None)
def test_every_float_survives_a_plain_table(tmp_path_factory, values):
    path = tmp_path_factory.getbasetemp() / "floats.csv"
    run = empty(valuations=tuple(valuation(1, value=value) for value in values))
    _write_csv(valuations(run), path)
    assert [float(row["value"]) for row in rows(path)] == values


def test_vega_names_its_unit(written):
    for name in ("deltas.csv", "underlying_deltas.csv"):
        vegas = [column for column in rows(written / name)[0] if "vega" in column]
        without_unit = {column for column in vegas if "per_vol_point" not in column}
        assert without_unit == ({"vega_currency"} if name == "deltas.csv" else {"trades_without_vega"})
    row = rows(written / "deltas.csv")[0]
    assert float(row["vega_per_vol_point_standard_error"]) == pytest.approx(
        abs(float(row["vega_per_vol_point"])) * 6e-3
    )


def test_trades_that_were_not_priced_have_blank_numbers_in_the_plain_table(written):
    last = rows(written / "valuations.csv")[-1]
    assert (last["trade_id"], last["status"]) == ("SMF-2003", "not priced")
    assert {last[name] for name in ("value", "standard_error", "lower", "upper", "paths", "expiry_date")} == {""}


def test_text_that_looks_like_a_formula_is_defused_and_numbers_are_not_touched(tmp_path):
    trade = valuation(1, trade_id="=1+1", counterparty="@home", strategy="-carry", netting_set="\tx", value=-5.2)
    row = rows(write_report(empty(valuations=(trade,)), tmp_path / "may") / "valuations.csv")[0]
    assert (row["trade_id"], row["counterparty"], row["strategy"]) == ("'=1+1", "'@home", "'-carry")
    assert row["netting_set"] == "'\tx"
    assert row["value"] == "-5.2"


def test_every_table_that_is_written_is_defused(run, tmp_path):
    evil = empty(
        valuations=tuple(replace(v, strategy="=1", counterparty="+1", product="@1") for v in run.valuations),
        cross_checks=tuple(replace(c, source="=1", reference_method="-x") for c in run.cross_checks),
        refusals=tuple(replace(r, trade_id="=1") for r in run.refusals),
        issues=tuple(replace(i, found="=1", mend="-1") for i in run.issues),
        underlyings=run.underlyings,
        market=replace(
            run.market,
            surfaces=tuple(
                replace(
                    s,
                    underlying="=1",
                    violations=("+1",),
                    failures=("-x",),
                    quotes=(replace(s.quotes[0], underlying="=1"),),
                )
                for s in run.market.surfaces
            ),
            curves=tuple(replace(c, curve="=1", collateral="@1", instrument="+1") for c in run.market.curves),
            credit=tuple(replace(c, name="-x") for c in run.market.credit),
            agreements=tuple(replace(a, netting_set="=1", counterparty="@1") for a in run.market.agreements),
        ),
    )
    out = write_report(evil, tmp_path / "may")
    for name in CSV_FILES:
        for row in rows(out / name):
            for text in row.values():
                assert text[:1] not in {"=", "@", "+"}
                assert text[:1] != "-" or math.isfinite(float(text))


def test_the_facts_of_the_run_are_complete(run, written):
    found = json.loads((written / "run.json").read_text(encoding="utf-8"))
    assert found["valuation_date"] == "2026-05-29"
    assert found["started"] == "2026-05-29T17:45:12+00:00"
    assert found["exit_status"] == run.exit_status == 1
    assert found["seed"] == 20_000
    assert found["sources"][0] == {"name": "may_book.xlsx", "sha256": "ab" * 32}
    assert found["settings"]["independent randomisations"] == "16"
    assert found["versions"]["numpy"] == "2.1.0"
    assert found["counts"]["trades"] == 43
    assert found["counts"]["not_priced"] == 3
    assert found["counts"]["problems"] == {"fatal": 0, "error": 4, "warning": 2}
    assert found["counts"]["cross_checks"][Verdict.DIFFERS] == 1
    assert sum(found["counts"]["cross_checks"].values()) == len(run.cross_checks)
    assert found["counts"]["cross_checks_without_sampling"] == 0
    assert found["counts"]["disputed"] == 0
    assert found["counts"]["failing_surface"] == 2
    assert found["counts"]["without_model_difference"] == 4
    assert (found["counts"]["surfaces"], found["counts"]["surfaces_failing"]) == (5, 1)
    assert (found["counts"]["quotes"], found["counts"]["quotes_beyond_target"]) == (250, 30)
    assert found["total"]["model_difference"] == pytest.approx(
        tables(run)["valuations"]["reporting_model_difference"].sum()
    )
    assert found["total"]["value"] == pytest.approx(sum(v.reporting_value for v in run.valuations))
    assert found["trade_seconds"][5] == {"trade_id": "SMF-1005", "seconds": run.valuations[5].seconds}
    assert found["timings"] == dict(run.facts.timings)
    assert "apostrophe" in found["csv_text_rule"]
    assert "estimates" in found["caution"]


def test_the_facts_keep_the_order_of_their_keys_even_when_nothing_was_read(written, tmp_path):
    full = json.loads((written / "run.json").read_text(encoding="utf-8"))
    bare = json.loads((write_report(empty(), tmp_path / "bare") / "run.json").read_text(encoding="utf-8"))
    assert list(full) == list(bare)
    assert list(full["counts"]) == list(bare["counts"])
    assert bare["total"]["value"] is None
    assert bare["exit_status"] == 2


def test_the_default_folder_is_the_date_and_the_book_and_counts_on(run, tmp_path):
    first = default_folder(run, tmp_path)
    assert first == tmp_path / "2026-05-29-saltmarsh-fen-structured-desk"
    first.mkdir()
    second = default_folder(run, tmp_path)
    assert second.name == "2026-05-29-saltmarsh-fen-structured-desk-2"
    second.write_text("a file of that name counts too")
    assert default_folder(run, tmp_path).name == "2026-05-29-saltmarsh-fen-structured-desk-3"


def test_importing_the_report_loads_no_table_library():
    script = "import sys, pricer.report; print({'pandas', 'openpyxl'} & set(sys.modules))"
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout == "set()\n"
