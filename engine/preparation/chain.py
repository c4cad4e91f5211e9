"""The chain: corrections, merging, amplitudes, scale, expansion. Each step is optional but for the last.

What is not asked for is not done: without corrections the intensities are taken as corrected, without
a scale they stay on their own, and every answer says so.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Literal, get_args

import numpy as np

from engine.amplitudes.corrections import Correction, correct
from engine.amplitudes.negatives import Amplitudes, bayesian_amplitudes, root_amplitudes
from engine.amplitudes.shells import s_squared, shell_means
from engine.amplitudes.wilson import WilsonPlot, wilson_plot
from engine.arrays import as_choice, as_positive
from engine.coefficients import CoefficientSet
from engine.errors import InputError
from engine.merging import Merged, merge
from engine.phases import Agreement as ModelAgreement
from engine.phases import coefficient_set
from engine.preparation.phasing import TrialModel, with_model
from engine.preparation.scales import KnownDensities, ReferenceSet, by_reference, by_two_densities, by_zero_term
from engine.reflections import Reflections
from engine.scattering import Composition, Probe, sum_of_squares, zero_term
from engine.symmetry import Classification, Expansion, Group, classify, expand

AmplitudeRule = Literal["bayesian", "root", "root_exclude"]
ScaleRule = Literal["none", "wilson", "factor", "zero_term", "two_densities", "reference"]

HALVES_SEED = 1729
"""Seed of the random halves of CC½: the same data give the same figure."""


@dataclass(frozen=True, slots=True, kw_only=True)
class Recipe:
    """What is to be done to reflections.

    Attributes
    ----------
    group : Group
        Symmetry; P1 or its like where none is known.
    friedel : bool
        Whether Friedel's law holds and mates are merged; false for a complex density.
    wavelength : float or None
        Å; needed by corrections.
    corrections : tuple of Correction
        Undone in the order given.
    amplitudes : {"bayesian", "root", "root_exclude"}
        Intensities to amplitudes: the estimate of French & Wilson; the plain square root, negative
        intensities refused; or the same, negative ones excluded and counted.
    reject_outliers : bool
    scale : {"none", "wilson", "factor", "zero_term", "two_densities", "reference"}
        Wilson's plot against ``content``; ``factor`` by which amplitudes are multiplied; the zero
        term of its own row against that of the content, or against ``mean`` × V; two ``known``
        densities; or the common reflections of a ``reference``.
    content : Composition or None
        Of one formula unit; with ``units`` in the cell it also gives the zero term.
    units : float
    probe : {"xray", "neutron"}
    factor : float or None
    mean : float or None
        Mean density.
    known : KnownDensities or None
    reference : ReferenceSet or None
    model : TrialModel or None
        Where the phases are to come from a model instead of the reflections.
    """

    group: Group
    friedel: bool = True
    wavelength: float | None = None
    corrections: tuple[Correction, ...] = ()
    amplitudes: AmplitudeRule = "bayesian"
    reject_outliers: bool = False
    scale: ScaleRule = "none"
    content: Composition | None = None
    units: float = 1.0
    probe: Probe = "xray"
    factor: float | None = None
    mean: float | None = None
    known: KnownDensities | None = None
    reference: ReferenceSet | None = None
    model: TrialModel | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Prepared:
    """What the chain made.

    Attributes
    ----------
    given : Reflections
        As they came, the zero term taken out.
    merged : Merged
        Of the corrected reflections.
    kinds : Classification
        Of the merged reflections.
    converted : Amplitudes or None
        Where intensities were turned into amplitudes.
    plot : WilsonPlot or None
    model : Agreement or None
        Of the amplitudes with those of the trial model.
    unique : Reflections
        Amplitudes, one of each orbit, scaled; of a model's map, its coefficients.
    expansion : Expansion
    zero_term : float, complex or None
        F(000): of the row of all indices zero, or of the content; None where neither is known.
    applied : tuple of str
        Every step in words.
    notes : tuple of str
        What a reader must know.
    recipe : Recipe
    scale_sigma : float
        Relative standard uncertainty of the scale of the amplitudes, as far as the scaling tells it.
    """

    given: Reflections
    merged: Merged
    kinds: Classification
    converted: Amplitudes | None
    plot: WilsonPlot | None
    model: ModelAgreement | None
    unique: Reflections
    expansion: Expansion
    zero_term: float | complex | None
    applied: tuple[str, ...]
    notes: tuple[str, ...]
    recipe: Recipe
    scale_sigma: float

    def coefficients(self, *, unit: str = "arbitrary") -> CoefficientSet:
        """The coefficients of the density; reflections without phase are in it, marked.

        Raises
        ------
        InputError
            As `engine.phases.coefficient_set`.
        """
        full = self.expansion.reflections
        if full.phase is None:
            # Amplitudes alone: enough for an autocorrelation.
            full = replace(full, phase=np.full(full.count, np.nan), phase_sigma=None, merit=None)
        density: Literal["real", "complex"] = "real" if self.recipe.friedel else "complex"
        made = coefficient_set(full, unit=unit, mean=self.zero_term, density=density)
        return replace(made, history=self.applied, group=self.recipe.group, scale_sigma=self.scale_sigma)


def prepare_reflections(reflections: Reflections, recipe: Recipe) -> Prepared:
    """Correct, merge, convert, scale and expand.

    Raises
    ------
    InputError
        What the steps refuse, a correction without wavelength, a scale without what it needs, or
        corrections and scales that do not fit amplitudes; a zero term given with different values, or
        of a real density with a phase other than 0 and 180°.
    """
    _check(reflections, recipe)
    applied: list[str] = []
    notes: list[str] = []
    given, zero = _without_zero(reflections, recipe, notes)
    corrected = given
    if recipe.corrections and recipe.wavelength is not None:
        step = correct(given, recipe.wavelength, recipe.corrections)
        corrected = step.reflections
        applied += [f"corrected for the {words}" for words in step.applied]
    elif reflections.quantity == "intensity":
        notes.append("No correction was asked for: intensities are taken to be proportional to |F|².")
    merged = merge(
        corrected,
        recipe.group,
        friedel=recipe.friedel,
        generator=np.random.default_rng(HALVES_SEED),
        reject_outliers=recipe.reject_outliers,
    )
    applied.append(_merging_words(merged, recipe))
    if merged.absences.count:
        notes.append(f"{merged.absences.count} rows are systematically absent in {recipe.group.name} and left out.")
    # Of two that differ none is rejected, even where rejection is asked for.
    for chosen, fate in ((merged.outliers.rejected, "left out"), (~merged.outliers.rejected, "kept")):
        if chosen.any():
            notes.append(f"{np.count_nonzero(chosen)} measurements lie far from their equivalents and are {fate}.")
    kinds = classify(merged.reflections.indices, recipe.group)
    plot, factor = _scale(merged.reflections, kinds, recipe, applied, notes)
    # Intensities were divided by the plot's scale, amplitudes by its root.
    scale_sigma = 0.0 if plot is None else 0.5 * plot.scale_sigma / plot.scale
    unique, converted = _amplitudes(merged.reflections, kinds, recipe, applied, notes)
    if recipe.scale == "zero_term":
        factor = by_zero_term(zero, _known_zero_term(recipe, reflections.lattice.volume))
        applied.append(f"put on the absolute scale by the zero term: amplitudes multiplied by {factor:.4g}")
    if recipe.reference is not None:
        unique, found = by_reference(unique, recipe.reference)
        scale_sigma = found.scale_sigma / found.scale
        applied.append(
            f"put on the scale of a reference by {found.common} common reflections: amplitudes multiplied by "
            f"{found.scale:.4g} ± {found.scale_sigma:.2g}, B {found.b:.3g} ± {found.b_sigma:.2g} Å²"
        )
        notes.extend(f"Scale to the reference: {note}." for note in found.notes)
    if factor is not None:
        unique = replace(unique.scaled(factor), scale="absolute")
        zero = None if zero is None else zero * factor
    phased, model = unique, None
    if recipe.model is not None:
        phased, model, words = with_model(unique, classify(unique.indices, recipe.group), recipe.group, recipe.model)
        applied.append(words)
    expansion = expand(phased, recipe.group, friedel=recipe.friedel)
    applied.append(
        f"expanded by {recipe.group.name} from {unique.count} unique to {expansion.reflections.count} reflections"
    )
    if recipe.known is not None:
        line = by_two_densities(expansion.reflections, recipe.known)
        expansion = replace(expansion, reflections=line.apply(expansion.reflections))
        phased, unique = line.apply(phased), line.apply(unique)
        zero = line.offset * reflections.lattice.volume
        scale_sigma = float(np.sqrt(line.covariance[0, 0]) / abs(line.slope))
        applied.append(
            f"put on the absolute scale by two known densities: amplitudes multiplied by {line.slope:.4g} ± "
            f"{np.sqrt(line.covariance[0, 0]):.2g}, mean density {line.offset:.4g} ± "
            f"{np.sqrt(line.covariance[1, 1]):.2g}"
        )
    elif recipe.model is not None and recipe.model.kind == "difference":
        # What the model lacks or has too much in all is not in the measured amplitudes.
        zero = None
    else:
        zero = _zero_term(zero, unique, recipe, applied)
    return Prepared(
        given=given,
        merged=merged,
        kinds=kinds,
        converted=converted,
        plot=plot,
        model=model,
        unique=phased,
        expansion=expansion,
        zero_term=zero,
        applied=tuple(applied),
        notes=tuple(notes),
        recipe=recipe,
        scale_sigma=scale_sigma,
    )


def _check(reflections: Reflections, recipe: Recipe) -> None:
    as_choice(recipe.amplitudes, get_args(AmplitudeRule), "amplitudes")
    as_choice(recipe.scale, get_args(ScaleRule), "scale")
    if recipe.corrections and recipe.wavelength is None:
        raise InputError("wavelength", "is absent", "corrections need it; give it in Å")
    if recipe.corrections and reflections.quantity == "amplitude":
        raise InputError("corrections", "are of intensities, and amplitudes were given", "leave them out")
    if recipe.scale == "wilson" and recipe.content is None:
        raise InputError("content", "is absent", "Wilson's plot needs the composition of the cell")
    for name, scale in (("factor", "factor"), ("known", "two_densities"), ("reference", "reference")):
        given = getattr(recipe, name) is not None
        if given and recipe.scale != scale:
            raise InputError(name, "has no meaning for this scale", "leave it out")
        if recipe.scale == scale and not given:
            raise InputError(name, "is absent", f"the scale {scale} needs it")
    if recipe.factor is not None:
        as_positive(recipe.factor, "factor", "absolute over given amplitude")
    if recipe.mean is not None and recipe.scale != "zero_term":
        raise InputError("mean", "has no meaning for this scale", "leave it out")


def _known_zero_term(recipe: Recipe, volume: float) -> float | None:
    """F(000) by the mean density, or by the content."""
    if recipe.mean is not None:
        return recipe.mean * volume
    if recipe.content is None:
        return None
    return zero_term(recipe.content, units=recipe.units, probe=recipe.probe)


def _without_zero(
    reflections: Reflections, recipe: Recipe, notes: list[str]
) -> tuple[Reflections, float | complex | None]:
    """Take out the row of all indices zero: it is neither measured like others nor merged with any."""
    at_zero = np.asarray(~reflections.indices.any(axis=1))
    rows = np.flatnonzero(at_zero)
    if not rows.size:
        return reflections, None
    rest = reflections.select(~at_zero)
    if not rest.count:
        raise InputError("indices", "hold the zero term alone", "give reflections")
    if reflections.quantity == "intensity":
        notes.append(f"{rows.size} rows of the zero term hold an intensity, which has no sign, and are left out.")
        return rest, None
    values = reflections.observed[rows].astype(np.complex128)
    if reflections.phase is not None:
        values *= np.exp(1j * np.nan_to_num(reflections.phase[rows]))
    rounding = 1e-6 * np.abs(values).max()
    if np.abs(values - values[0]).max() > rounding:
        raise InputError.for_rows(
            "indices", reflections.row[rows], "are zero with different values", "give F(000) once"
        )
    if reflections.phase is None or np.isnan(reflections.phase[rows]).any():
        notes.append("The zero term has no phase and is taken as positive.")
    if not recipe.friedel:
        return rest, complex(values[0])
    if abs(values[0].imag) > rounding:
        raise InputError.for_rows(
            "phase",
            reflections.row[rows],
            "is neither 0 nor 180° where the zero term of a real density is real",
            "give it one of the two, or ask for a complex density",
        )
    return rest, float(values[0].real)


def _merging_words(merged: Merged, recipe: Recipe) -> str:
    mates = "Friedel mates joined" if recipe.friedel else "Friedel mates kept apart"
    return (
        f"{merged.overall.measurements} measurements merged to {merged.overall.unique} unique in "
        f"{recipe.group.name}, {mates}"
    )


def _scale(
    merged: Reflections, kinds: Classification, recipe: Recipe, applied: list[str], notes: list[str]
) -> tuple[WilsonPlot | None, float | None]:
    """Wilson's plot, and the factor that amplitudes are multiplied by."""
    if recipe.scale == "none":
        if merged.scale == "arbitrary":
            notes.append("The scale is arbitrary: nothing was said that would make it absolute.")
        return None, None
    if recipe.scale in ("zero_term", "two_densities", "reference"):
        return None, None
    if recipe.scale == "factor" or recipe.content is None:
        applied.append(f"amplitudes multiplied by {recipe.factor:g}")
        return None, recipe.factor
    s = np.sqrt(s_squared(merged))
    # Of a cell with c lattice points F is c times that of the primitive cell, which holds 1/c of the
    # content: the reflections that are not absent have ⟨|F|²⟩ = c² (Σf²/c).
    expected = len(recipe.group.centring) * sum_of_squares(recipe.content, s, units=recipe.units, probe=recipe.probe)
    plot = wilson_plot(merged, expected, epsilon=kinds.epsilon, centric=kinds.centric)
    applied.append(
        f"put on the absolute scale by Wilson's plot against {recipe.content.formula} × {recipe.units:g}: "
        f"intensities divided by {plot.scale:.4g} ± {plot.scale_sigma:.2g}; "
        f"overall B {plot.b:.3g} ± {plot.b_sigma:.2g} Å², left in the amplitudes"
    )
    notes.extend(f"Wilson's plot: {note}." for note in plot.notes)
    return plot, plot.scale**-0.5


def _amplitudes(
    merged: Reflections, kinds: Classification, recipe: Recipe, applied: list[str], notes: list[str]
) -> tuple[Reflections, Amplitudes | None]:
    if merged.quantity == "amplitude":
        return merged, None
    if recipe.amplitudes == "bayesian":
        means = shell_means(merged, epsilon=kinds.epsilon, centric=kinds.centric)
        made = bayesian_amplitudes(
            merged, expected=means.at(s_squared(merged)), epsilon=kinds.epsilon, centric=kinds.centric
        )
        applied.append("amplitudes are the Bayesian estimate of French & Wilson (1978)")
    else:
        made = root_amplitudes(merged, negative="refuse" if recipe.amplitudes == "root" else "exclude")
        applied.append("amplitudes are the square roots of the intensities")
    if made.negative:
        notes.append(f"{made.negative} merged intensities are negative by noise.")
    if made.excluded_rows.size:
        notes.append(f"{made.excluded_rows.size} reflections without a root are left out.")
    return made.reflections, made


def _zero_term(
    zero: float | complex | None, unique: Reflections, recipe: Recipe, applied: list[str]
) -> float | complex | None:
    """F(000) of its row, or of the content where the scale is absolute."""
    if zero is not None:
        applied.append(f"zero term {zero:.6g} of its own row")
        return zero
    if recipe.content is None or unique.scale != "absolute":
        return None
    value = zero_term(recipe.content, units=recipe.units, probe=recipe.probe)
    applied.append(f"zero term {value:.6g} of the content, {recipe.content.formula} × {recipe.units:g}")
    return value
