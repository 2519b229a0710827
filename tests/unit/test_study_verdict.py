import csv
import io
import json
import math
from collections.abc import Mapping
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import BaseModel, create_model

from skipline.recon.study.cases import Case
from skipline.recon.study.settings import Acquisition, Limit, Reference, Sampling
from skipline.recon.study.tables import Row, cases_csv, summary_csv
from skipline.recon.study.verdict import decide

LIMITS = {"nrmse": Limit(at_most=0.05), "ssim": Limit(at_least=0.9)}


class Pattern(BaseModel):
    power: float = 2.0


class Sparse(BaseModel):
    solver: str = "fista"
    power: int = 1


class Direct(BaseModel):
    pass


def row(
    acceleration,
    measures,
    *,
    draw=0,
    method="sparse",
    pattern="lines",
    snr: float | None = 30.0,
    solver="fista",
    converged=True,
):
    case = Case(
        7,
        Reference(phantom="slab", matrix=(64, 64)),
        Acquisition(coils=1, snr=snr),
        Sampling(pattern=pattern, acceleration=acceleration, phase_encode="y", calibration=8),
        Pattern(),
        method,
        Sparse(solver=solver) if method == "sparse" else Direct(),
        draw,
        0,
    )
    if measures is None:
        return Row(case, None, "it broke")
    nrmse, ssim = measures
    record = {
        "acceleration_achieved": acceleration,
        "measures": {"nrmse": nrmse, "ssim": ssim},
        "convergence": {"converged": converged, "stopped": "done", "iterations": 12},
        "seconds": 0.25,
    }
    return Row(case, record)


def verdict(rows, limits=LIMITS):
    found = decide("Slab", rows, limits, ["nrmse", "ssim"])
    json.dumps(found)  # all of it can be written
    return found


def table(text):
    return list(csv.DictReader(io.StringIO(text)))


def test_the_highest_acceleration_below_which_all_pass():
    found = verdict([row(4, (0.06, 0.97)), row(2, (0.02, 0.99)), row(3, (0.03, 0.98)), row(6, (0.01, 0.99))])
    assert found["acceleration"] == 3, "6 passes, but 4 below it does not"
    assert found["sentence"] == (
        "R = 3 is the highest of those tried (2, 3, 4, 6) that meets every limit, with lines and sparse; "
        "at R = 4 nrmse breaks first: 0.06, 20.0% beyond its limit of at most 0.05."
    )
    assert found["first_failure"]["measure"] == "nrmse"
    assert found["first_failure"]["excess"] == pytest.approx(0.2)
    assert [point["passes"] for point in found["curves"][0]["points"]] == [True, True, False, True]


def test_the_mean_over_the_draws_decides():
    rows = [row(2, (0.03, 0.99)), row(2, (0.07, 0.99), draw=1), row(2, (0.0499, 0.99), draw=2)]
    assert verdict(rows)["acceleration"] == 2
    assert verdict([*rows, row(2, (0.0502, 0.99), draw=3)])["acceleration"] is None


def test_the_limit_that_is_crossed_first_breaks_first():
    # nrmse is further beyond its limit at R = 4, but ssim leaves it sooner on the way there
    found = verdict([row(2, (0.0, 0.905)), row(4, (0.08, 0.85))])
    assert found["first_failure"]["measure"] == "ssim"
    assert found["first_failure"]["excess"] == pytest.approx(0.05 / 0.9)


def test_the_better_choice_wins_and_ties_go_to_the_wider_margin():
    zero = [row(2, (0.04, 0.95), method="zero"), row(4, (0.09, 0.7), method="zero")]
    found = verdict([*zero, row(2, (0.01, 0.99)), row(4, (0.02, 0.97)), row(4, (0.03, 0.96), solver="admm")])
    assert found["acceleration"] == 4
    assert found["label"] == "lines and sparse (solver fista)"
    assert found["choice"]["solver"] == "fista"
    assert [curve["acceleration"] for curve in found["curves"]] == [2, 4, 4]


def test_all_pass():
    found = verdict([row(2, (0.01, 0.99)), row(6, (0.04, 0.95))])
    assert found["acceleration"] == 6
    assert found["first_failure"] is None
    assert (
        found["sentence"]
        == "R = 6 is the highest acceleration tried, and no limit broke with lines and sparse."
    )


def test_none_passes():
    found = verdict([row(2, (0.2, 0.95), method="zero"), row(2, (0.06, 0.5))])
    assert found["acceleration"] is None
    assert found["choice"] is None
    assert found["sentence"].startswith(
        "No acceleration passes: at R = 2, the lowest tried, ssim breaks first: 0.5,"
    )
    assert "lines and sparse" in found["sentence"], "44% beyond a limit is nearer than 300%"


def test_no_limit():
    found = verdict([row(2, (0.2, 0.95))], {})
    assert found["acceleration"] is None
    assert found["sentence"].startswith("No limit was given, so there is no verdict")
    assert found["curves"][0]["points"][0]["means"] == {"nrmse": 0.2, "ssim": 0.95}


def test_conditions_have_to_pass_together():
    rows = [
        row(2, (0.01, 0.99), snr=50),
        row(4, (0.02, 0.98), snr=50),
        row(2, (0.03, 0.99), snr=10),
        row(4, (0.06, 0.98), snr=10),
    ]
    found = verdict(rows)
    assert found["acceleration"] == 2
    assert "at R = 4 under snr 10 nrmse breaks first" in found["sentence"]


def test_failed_and_unconverged_cases_are_named():
    rows = [row(2, (0.01, 0.99), converged=False), row(4, (0.02, 0.98)), row(4, None, draw=1)]
    found = verdict(rows)
    assert found["acceleration"] is None, "the failed case might have passed"
    assert found["sentence"].startswith(
        "Not decided: 1 of 3 cases failed; R = 2 is the highest of those tried"
    )
    assert "at R = 4 1 case failed" in found["sentence"]
    assert found["curves"][0]["acceleration"] == 2
    assert found["failed"] == [{"id": rows[2].case.id, "case": str(rows[2].case), "error": "it broke"}]
    assert found["not_converged"][0]["id"] == rows[0].case.id
    assert any(rows[0].case.id in warning for warning in found["warnings"])


def test_all_failed():
    found = verdict([row(2, None)])
    assert found["acceleration"] is None
    assert found["cases"] == 1
    assert found["sentence"].startswith("Not decided: 1 of 1 cases failed; no acceleration passes: at R = 2,")


def test_a_failure_of_another_choice_leaves_it_open_too():
    rows = [row(2, (0.01, 0.99)), row(4, (0.01, 0.99)), row(4, None, method="zero")]
    found = verdict(rows)
    assert found["acceleration"] is None
    assert found["sentence"].startswith("Not decided: 1 of 3 cases failed; R = 4 is the highest acceleration")


def test_nan_never_passes():
    assert verdict([row(2, (math.nan, 0.99))])["acceleration"] is None


@given(st.lists(st.tuples(st.floats(0, 0.1), st.floats(0.8, 1)), min_size=1, max_size=6))
def test_everything_up_to_the_verdict_passes_and_the_next_does_not(measured):
    found = verdict([row(1 + i, measures) for i, measures in enumerate(measured)])
    good = [nrmse <= 0.05 and ssim >= 0.9 for nrmse, ssim in measured]
    passed = int(found["acceleration"] or 0)
    assert all(good[:passed])
    assert passed == len(good) or not good[passed]


def test_cases_table():
    rows = [
        row(2, (0.01, 0.99), method="zero"),
        row(2, (0.01, 0.99)),
        row(2.5, (0.02, 0.98), draw=1),
        row(4, None),
    ]
    text = cases_csv(rows, ["nrmse", "ssim"])
    assert text.startswith(
        "reference,coils,snr,pattern,calibration,calibration_shape,shutter,partial_fourier,skip_conjugates,power,"
        "acceleration,acceleration_achieved,draw,noise_draw,method,"
        "solver,method_power,nrmse,ssim,iterations,converged,stopped,seconds,error,id,note\n"
    )
    zero, first, second, failed = table(text)
    assert (zero["method"], zero["solver"], zero["power"]) == ("zero", "", "2")
    assert (first["solver"], first["acceleration"], first["converged"]) == ("fista", "2", "true")
    assert (second["acceleration"], second["draw"], second["nrmse"]) == ("2.5", "1", "0.02")
    assert (failed["error"], failed["nrmse"], failed["id"]) == ("it broke", "", rows[3].case.id)
    assert first["note"] == "research only; not for diagnosis"


def test_summary_table():
    rows = [row(2, (0.01, 0.9)), row(2, (0.03, 0.9), draw=1), row(2, None, draw=2), row(4, (0.02, math.inf))]
    two, four = table(summary_csv(rows, ["nrmse", "ssim"]))
    assert float(two["nrmse_mean"]) == pytest.approx(0.02)
    assert float(two["nrmse_sd"]) == pytest.approx(0.0141421, rel=1e-5)  # (0.03 - 0.01) / sqrt 2
    assert (two["nrmse_n"], two["failed"], two["not_converged"]) == ("2", "1", "0")
    assert (four["nrmse_sd"], four["ssim_mean"]) == ("", "inf")
    assert "draw" not in two


def test_ids_follow_what_determines_the_result():
    base = row(2, (0, 1)).case
    same = row(2.0, (1, 0)).case
    assert base.id == same.id
    others = [row(3, (0, 1)), row(2, (0, 1), draw=1), row(2, (0, 1), snr=None), row(2, (0, 1), method="zero")]
    assert len({base.id, *(other.case.id for other in others)}) == 5
    assert base.reference_id == others[2].case.reference_id, "noise does not change the reference"


NAMES = ["draw", "noise_draw", "method", "acceleration", "coils", "maps", "reference", "pattern", "seed"]


def model(options: Mapping[str, Any]) -> BaseModel:
    fields: dict[str, Any] = {name: (int, value) for name, value in options.items()}
    return create_model("Options", **fields)()


def test_options_of_any_name_overwrite_no_setting():
    def case(pattern: int, method: int, draw=0, acceleration=2.0):
        reference = Reference(phantom="slab", matrix=(64, 64))
        sampling = Sampling(pattern="lines", acceleration=acceleration, phase_encode="y")
        options = [model(dict.fromkeys(NAMES, value)) for value in (pattern, method)]
        return Case(7, reference, Acquisition(coils=1), sampling, options[0], "sparse", options[1], draw, 0)

    base = case(0, 0)
    cases = [base, case(1, 0), case(0, 1), case(0, 0, 1), case(0, 0, acceleration=3.0)]
    assert len({one.id for one in cases}) == 5
    assert len({str(one.settings) for one in cases}) == 5
    assert (base.settings["acceleration"], base.settings["method"], base.settings["coils"]) == (
        2.0,
        "sparse",
        1,
    )
    assert len(base.settings) == len(set(base.condition)) + 9 + 4 + 2 * len(NAMES)


@pytest.mark.parametrize("name", NAMES)
def test_one_option_of_such_a_name(name):
    def case(value):
        reference = Reference(phantom="slab", matrix=(64, 64))
        sampling = Sampling(pattern="lines", acceleration=2, phase_encode="y")
        pattern = model({name: value})
        return Case(7, reference, Acquisition(coils=1), sampling, pattern, "sparse", Direct(), 0, 0)

    assert case(1).id != case(2).id
