"""Every demo and template, fitted: all models, no complaint, and what people keep comes back byte for byte."""

from __future__ import annotations

from pathlib import Path

import pytest

from bridge import samples
from bridge.job import Outcome, fit_workbook
from bridge.messages import Severity
from demo_workbooks.make.truth import BOATYARD, COLD_STORE, FLOW_METER
from tests.samples import parts

WORKBOOKS = dict(samples.demo_files()) | {name: samples.template(name) for name in samples.template_names()}
SHARED = {"[Content_Types].xml", "xl/workbook.xml", "xl/_rels/workbook.xml.rels", "xl/styles.xml", "xl/calcChain.xml"}


@pytest.fixture(params=list(WORKBOOKS))
def placed(request: pytest.FixtureRequest, tmp_path: Path) -> Path:
    path = tmp_path / request.param
    path = path if path.suffix else path.with_suffix(".xlsx")
    path.write_bytes(WORKBOOKS[request.param])
    return path


def test_fits_without_a_word_of_complaint(placed: Path) -> None:
    before = parts(placed)
    request = _request_part(before)
    report = fit_workbook(placed)
    loud = [problem.text for problem in report.all_problems if problem.severity is not Severity.NOTE]
    assert loud == []
    assert report.outcome is Outcome.FITTED
    assert report.exit_code == 0
    assert report.models
    assert all(model.result is not None for model in report.models)
    after = parts(placed)
    ours = SHARED | {"docProps/app.xml", request, request.replace("sheets/", "sheets/_rels/") + ".rels"}
    assert {name: after.get(name) for name in before if name not in ours} == {
        name: part for name, part in before.items() if name not in ours
    }
    assert fit_workbook(placed).outcome is Outcome.UNCHANGED


def _request_part(members: dict[str, bytes]) -> str:
    """The request is the last sheet of every sample."""
    return max(name for name in members if name.startswith("xl/worksheets/sheet"))


TRUTHS = {
    ("boatyard.xlsx", "C"): {
        "log length (m)": BOATYARD.slope["oak"],
        "hull steel": BOATYARD.start["steel"] - BOATYARD.start["oak"],
        "coats": BOATYARD.coat,
        "crew": BOATYARD.crew,
    },
    ("cold store.xlsx", "bend_serial"): {
        "intercept": COLD_STORE.start,
        "outdoor temperature (°C)": COLD_STORE.below,
        "outdoor temperature (°C) above 12": COLD_STORE.above - COLD_STORE.below,
        "throughput (t)": COLD_STORE.per_tonne,
    },
    ("flow meter.xlsx", "weighted"): {"intercept": FLOW_METER.start, "reference flow (m³/h)": FLOW_METER.slope},
}


@pytest.mark.parametrize(("file", "name"), TRUTHS)
def test_finds_the_truth(file: str, name: str, tmp_path: Path) -> None:
    """Within 4 standard errors, by the labels that the sheets show."""
    path = tmp_path / file
    path.write_bytes(WORKBOOKS[file])
    model = next(model for model in fit_workbook(path, write=False).models if model.name == name)
    assert model.result is not None
    fit = model.result.fit
    labels = [column.label for column in model.result.design.columns]
    for label, value in TRUTHS[file, name].items():
        at = labels.index(label)
        assert abs(fit.coefficients[at] - value) < 4 * fit.standard_errors[at], label
