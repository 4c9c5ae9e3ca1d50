"""A calibration on paper, and as the file that jobs bind."""

from __future__ import annotations

import hashlib
from collections.abc import Sequence
from typing import Any

from stackmill.documents.mill import Mill
from stackmill.logbook.coupons import HALF_TRUSTED, CalibrationFit, Learnt
from stackmill.report.render import Grid, Paper, csv_text, json_text, wrapped

ROW_NAMES = (
    "name",
    "material",
    "energy_ev",
    "incidence_deg",
    "rate_nm_per_min",
    "rate_rel_sd",
    "fitted_nm_per_min",
    "off_sd",
    "weight",
    "leverage",
)


def machine_rows(fit: CalibrationFit) -> list[dict[str, Any]]:
    """One dict a coupon."""
    return [
        {
            "name": one.coupon.name,
            "material": one.coupon.material,
            "energy_ev": one.coupon.energy_ev,
            "incidence_deg": one.coupon.incidence_deg,
            "rate_nm_per_min": 60.0 * one.rate_nm_per_s.value,
            "rate_rel_sd": one.rate_nm_per_s.rel_sd,
            "fitted_nm_per_min": 60.0 * one.fitted_nm_per_s,
            "off_sd": one.off_sd,
            "weight": one.weight,
            "leverage": one.leverage,
        }
        for one in fit.fits
    ]


def as_json(fit: CalibrationFit, warnings: Sequence[str], paper: Paper) -> str:
    """The whole fit for machines, covariance and all."""
    envelope = {
        "verdict": fit.verdict,
        "why": fit.why,
        "reduced_chi_square": fit.reduced_chi_square,
        "warnings": list(warnings),
        "learnt": [
            {"what": one.what, "factor": one.factor, "ln_sd_before": one.sd_before, "ln_sd_after": one.sd_after}
            for one in fit.learnt
        ],
        "parameters": list(fit.belief.names),
        "mean": fit.belief.mean.tolist(),
        "covariance": fit.belief.cov.tolist(),
    }
    return json_text(machine_rows(fit), envelope, paper)


def as_csv(fit: CalibrationFit, paper: Paper) -> str:
    """The coupons as CSV."""
    return csv_text(machine_rows(fit), ROW_NAMES, paper)


def as_text(fit: CalibrationFit, mill: Mill, paper: Paper, *, markdown: bool = False) -> str:
    """The fit for people."""
    style = "github" if markdown else "simple"
    headers = ["coupon", "material", "at", "measured\nnm/min", "fitted\nnm/min", "off\nsd", "weight", "leverage"]
    coupons = [
        [
            one.coupon.name,
            one.coupon.material,
            f"{one.coupon.energy_ev:.4g} eV, {one.coupon.incidence_deg:.3g}°",
            f"{60 * one.rate_nm_per_s.value:.1f} ± {100 * one.rate_nm_per_s.rel_sd:.1f} %",
            f"{60 * one.fitted_nm_per_s:.1f}",
            f"{one.off_sd:+.1f}",
            f"{100 * one.weight:.0f} %",
            f"{100 * one.leverage:.0f} %",
        ]
        for one in fit.fits
    ]
    learnt = [[one.what, f"{one.factor:.3f}", _percent(one.sd_before), _percent(one.sd_after)] for one in fit.learnt]
    parts = [
        wrapped(
            f"{fit.verdict.upper()}: {fit.why}. Reduced chi-square {fit.reduced_chi_square:.2f}.", paper.width, "  "
        ),
        f"Mill: {mill.title or 'untitled'}, {mill.gas}",
        Grid(headers, coupons, frozenset({3, 4, 5, 6, 7})).text(style),
        Grid(["", "times the\nlibrary's", "sd\nbefore", "sd\nafter"], learnt, frozenset({1, 2, 3})).text(style),
        "\n".join(wrapped(line, paper.width, "  ") for line in _notes(fit)),
    ]
    return paper.plain("\n\n".join(parts))


def _notes(fit: CalibrationFit) -> list[str]:
    notes = [
        "off: how far a coupon is from what library and the other coupons say, in sds of both. weight: what it counts."
        " leverage: how much of the fit at its setting is its own doing.",
        "Materials are told at the setting of their first coupon, those without one at normal incidence inside their"
        " measured energies. Away from the coupons' energies and angles the sd grows again by itself.",
    ]
    notes += [
        f"WILD: {one.coupon.name!r} is {abs(one.off_sd):.1f} sd off and counts {100 * one.weight:.0f} % (leverage"
        f" {100 * one.leverage:.0f} %): mill that piece again."
        for one in fit.fits
        if one.weight < HALF_TRUSTED
    ]
    return notes


def _percent(sd: float) -> str:
    return f"{100 * sd:.1f} %" if sd < 1.0 else "unknown"


def as_file(fit: CalibrationFit, mill: Mill, *, made: str, data: str, content: bytes) -> str:
    """The calibration file, ready to be bound by jobs. made: the day; data, content: the coupon file."""
    ranges = ", ".join(
        sorted({f"{one.coupon.energy_ev:.4g} eV at {one.coupon.incidence_deg:.3g} deg" for one in fit.fits})
    )
    title = f"{mill.title or 'untitled mill'}, {made}"
    lines = [
        "# Written by stackmill calibrate: bind it in a job as `calibration: FILE`. Only gas and coupons count.",
        f"title: {_quoted(title)}",
        f"mill: {_quoted(mill.title)}",
        f"gas: {mill.gas}",
        f"made: {_quoted(made)}",
        f"data: {_quoted(data)}",
        f"data_sha256: {_quoted(hashlib.sha256(content).hexdigest())}",
        f"verdict: {fit.verdict}",
        f"reduced_chi_square: {_quoted(f'{fit.reduced_chi_square:.3f}')}",
        "learnt:",
        f"  - {_quoted(f'covered: {ranges}')}",
        *(f"  - {_quoted(_in_words(one))}" for one in fit.learnt),
        "coupons:",
    ]
    for rate in fit.rates(mill):
        lines.append(
            f"  - {{name: {_quoted(rate.name)}, material: {_quoted(rate.material)}, energy: {rate.energy!r} eV,"
            f" incidence: {rate.incidence!r} deg, current_density: {rate.current_density.value!r} mA/cm2,"
            f" rate: {60.0 * rate.rate.value!r} nm/min ± {60.0 * rate.rate.sd!r} nm/min,"
            f" weight: {100.0 * rate.weight:.6g} %, out_of_line: {_quoted(rate.out_of_line)}}}"
        )
    return "\n".join(lines)


def _in_words(one: Learnt) -> str:
    return f"{one.what}: {one.factor:.4f} times, sd {_percent(one.sd_before)} before, {_percent(one.sd_after)} after"


def _quoted(text: str) -> str:
    return '"' + text.replace("\\", "\\\\").replace('"', '\\"') + '"'
