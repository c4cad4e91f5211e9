"""The summary of a file of reflections in a terminal."""

from __future__ import annotations

from typing import Any

ROWS_SHOWN = 10


def render_summary(summary: dict[str, Any]) -> str:
    """The summary as text: what was read, how good it is, what to beware of."""
    return "\n".join([*_read(summary), "", *_quality(summary), "", *_shells(summary), "", *_words(summary)])


def _read(summary: dict[str, Any]) -> list[str]:
    file = summary["file"]
    block = f", block {file['block']}" if file["block"] else ""
    columns = ", ".join(name if name == column else f"{name} ({column})" for name, column in file["columns"].items())
    lines = [f"  {file['kind']}{block}: {file['rows_read']} rows; {columns}"]
    lines += [f"  left out: {one['rows']} rows, {one['reason']}" for one in file["left_out"]]
    if file["cell"]:
        lines.append("  cell " + " ".join(f"{number:.6g}" for number in file["cell"]))
    if file["wavelengths"]:
        lines.append("  wavelength " + ", ".join(f"{length:g}" for length in file["wavelengths"]) + " Å")
    return lines


def _quality(summary: dict[str, Any]) -> list[str]:
    agreement = summary["agreement"]
    lines = [
        f"  {summary['rows']} reflections, {summary['unique']} unique in {summary['group']}, "
        f"{summary['expanded']} expanded; {summary['phased']} unique with a phase",
        f"  {summary['d_max']:.4g} … {summary['d_min']:.4g} Å, completeness {100 * summary['completeness']:.1f} %, "
        f"centric {100 * summary['centric_share']:.0f} %",
        f"  redundancy {agreement['redundancy']:.2f}, R_merge {_shown(agreement['r_merge'])}, "
        f"R_meas {_shown(agreement['r_meas'])}, R_pim {_shown(agreement['r_pim'])}, "
        f"CC½ {_shown(agreement['cc_half'])}, χ² {_shown(agreement['chi_squared'])}",
    ]
    if summary["absences"]:
        lines.append(
            f"  {summary['absences']} systematically absent: mean I/σ {_shown(summary['absence_signal'])}, "
            f"others {_shown(summary['other_signal'])}"
        )
    if summary["outliers"]:
        rows = ", ".join(str(row) for row in summary["outlier_rows"][:ROWS_SHOWN])
        lines.append(f"  {summary['outliers']} outliers; the worst in rows {rows}, counted from 0")
    if summary["wilson_b"] is not None:
        lines.append(
            f"  Wilson's plot: B {summary['wilson_b']:.3g} ± {summary['wilson_b_sigma']:.2g} Å², "
            f"scale {summary['wilson_scale']:.4g} ± {summary['wilson_scale_sigma']:.2g}"
        )
    if summary["model_r"] is not None:
        lines.append(f"  trial model: R {summary['model_r']:.3f}, weighted {summary['model_weighted_r']:.3f}")
    if summary["statistics"]:
        lines.append(f"  intensities: {summary['statistics']}")
    return lines


def _shells(summary: dict[str, Any]) -> list[str]:
    lines = ["      d_max    d_min  observed/possible        %"]
    lines += [
        f"  {shell['d_max']:9.3f}{shell['d_min']:9.3f}{shell['observed']:9d}/{shell['possible']:<9d}"
        f"{100 * shell['completeness']:8.1f}"
        for shell in summary["completeness_shells"]
    ]
    lines += ["", "      d_max    d_min   unique   redundancy   ⟨I/σ⟩   R_meas    R_pim     CC½"]
    for shell in summary["agreement_shells"]:
        d_max = "        ∞" if shell["d_max"] is None else f"{shell['d_max']:9.3f}"
        numbers = "".join(f"{_shown(shell[name]):>9}" for name in ("mean_signal", "r_meas", "r_pim", "cc_half"))
        lines.append(f"  {d_max}{shell['d_min']:9.3f}{shell['unique']:9d}{shell['redundancy']:12.2f}{numbers}")
    return lines


def _words(summary: dict[str, Any]) -> list[str]:
    lines = [f"  · {text}" for text in summary["applied"]]
    lines += [f"  ! {text}" for text in summary["warnings"]]
    return lines + [f"  ! {one['kind']}: {one['words']}" for one in summary["file"]["remarks"]]


def _shown(number: float | None) -> str:
    return "–" if number is None else f"{number:.3g}"
