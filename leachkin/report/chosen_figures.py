"""Which figures a run has: only those whose stage is there."""

from __future__ import annotations

from leachkin.campaign import CampaignResult
from leachkin.report.cementation_figures import cementation_figures
from leachkin.report.figures.style import ReportFigure
from leachkin.report.kinetics_figures import kinetics_figures
from leachkin.report.plant_figures import plant_figures


def report_figures(result: CampaignResult) -> tuple[ReportFigure, ...]:
    """Return the figures of a run in the order of the work.

    Parameters
    ----------
    result : CampaignResult

    Returns
    -------
    tuple of ReportFigure
        SVG text, the same bytes for the same result.
    """
    return (*kinetics_figures(result), *plant_figures(result), *cementation_figures(result))
