"""A reaction network in core SBML as a mechanism to start from."""

from __future__ import annotations

import re
from collections.abc import Iterable
from pathlib import Path
from typing import Any

from ruleout.errors import InputError
from ruleout.exchange.formulas import NotUnderstoodError, from_mathml
from ruleout.exchange.library import libsbml
from ruleout.exchange.text import checked_text
from ruleout.expressions import Expr, const, sym, symbols, to_text
from ruleout.files.names import LONGEST, RESERVED
from ruleout.files.text import read_text
from ruleout.mechanism.types import Edge, Fixed, LogNormal, Mechanism, Node, Prior, Tied

LARGEST_FILE = 20_000_000
FOLD = 10.0
"""Width of the prior put around every positive rate constant of the file."""
SECONDS = {1.0: "s", 60.0: "min", 3600.0: "h", 86400.0: "day"}
NAMED_AT_MOST = 8


def import_sbml(path: Path | str) -> str:
    """Return a reaction network in core SBML as the text of a ``mechanism.toml``.

    Every species becomes a pool (an input if the file holds it constant), every reaction a
    converting edge with its kinetic law as ``rate``. Parameters get lognormal priors around the
    values in the file; one that several reactions share is tied.

    Parameters
    ----------
    path : path
        Level 2 or 3, core only.

    Raises
    ------
    InputError
        If the file is no valid SBML, or uses what a mechanism cannot say: each construct that is
        not understood is named.
    """
    path = Path(path)
    text = read_text(path, limit=LARGEST_FILE)
    _refuse_doctype(text, path)
    library = libsbml()
    document = library.readSBMLFromString(text)
    _check_errors(document, path)
    model = document.getModel()
    if model is None:
        raise InputError("there is no model in this file", where=str(path))
    if model.getNumFunctionDefinitions():
        _expand(document, "expandFunctionDefinitions")
    if model.getNumInitialAssignments():
        _expand(document, "expandInitialAssignments")
    trouble = list(_not_understood(document, model))
    reader = _Reader(model, path.stem)
    mechanism = reader.mechanism()
    trouble += reader.trouble
    if trouble:
        shown = "; ".join(trouble[:NAMED_AT_MOST])
        more = f"; and {len(trouble) - NAMED_AT_MOST} more" if len(trouble) > NAMED_AT_MOST else ""
        raise InputError(
            f"this model uses what a mechanism cannot say: {shown}{more}", where=str(path)
        )
    if not mechanism.nodes:
        raise InputError("there is no species in this model", where=str(path))
    return checked_text(
        mechanism,
        (
            f"Imported from {path.name}. A mechanism to start from: mark what is in dispute with",
            "contested = true, and replace the priors, which stand around the values of the file.",
        ),
        where=str(path),
    )


def _refuse_doctype(text: str, path: Path) -> None:
    if "<!DOCTYPE" in text or "<!ENTITY" in text:
        raise InputError(
            "the file declares a document type or entities, which are not read", where=str(path)
        )


def _check_errors(document: Any, path: Path) -> None:
    library = libsbml()
    log = document.getErrorLog()
    for i in range(log.getNumErrors()):
        error = log.getError(i)
        if error.getSeverity() >= library.LIBSBML_SEV_ERROR:
            message = " ".join(error.getShortMessage().split())
            raise InputError(
                f"this is no valid SBML ({message})", where=f"{path}:{error.getLine()}"
            )


def _expand(document: Any, option: str) -> None:
    library = libsbml()
    properties = library.ConversionProperties()
    properties.addOption(option, True)
    document.convert(properties)


def _not_understood(document: Any, model: Any) -> Iterable[str]:
    """Yield every construct of the model that has no counterpart."""
    library = libsbml()
    for i in range(document.getNumPlugins()):
        package = document.getPlugin(i).getPackageName()
        # The library shows the mathematics of Level 3 Version 2 core as a package of its own.
        if package != "l3v2extendedmath" and document.getPackageRequired(package):
            yield f"package '{package}'"
    for rule in (model.getRule(i) for i in range(model.getNumRules())):
        kinds = {
            library.SBML_ASSIGNMENT_RULE: "assignment rule",
            library.SBML_RATE_RULE: "rate rule",
        }
        kind = kinds.get(rule.getTypeCode(), "algebraic rule")
        yield f"{kind} for '{rule.getVariable()}'" if rule.getVariable() else kind
    for i in range(model.getNumEvents()):
        yield f"event '{model.getEvent(i).getId() or i + 1}'"
    for i in range(model.getNumConstraints()):
        yield f"constraint {i + 1}"
    for i in range(model.getNumFunctionDefinitions()):
        yield f"function definition '{model.getFunctionDefinition(i).getId()}'"
    for i in range(model.getNumInitialAssignments()):
        yield f"initial assignment for '{model.getInitialAssignment(i).getSymbol()}'"
    for compartment in (model.getCompartment(i) for i in range(model.getNumCompartments())):
        if not compartment.getConstant():
            yield f"compartment '{compartment.getId()}' of changing size"
    for species in (model.getSpecies(i) for i in range(model.getNumSpecies())):
        if species.isSetConversionFactor():
            yield f"conversion factor of species '{species.getId()}'"
    if model.isSetConversionFactor():
        yield "conversion factor of the model"
    for reaction in (model.getReaction(i) for i in range(model.getNumReactions())):
        if reaction.isSetFast() and reaction.getFast():
            yield f"fast reaction '{reaction.getId()}'"
        if not reaction.isSetKineticLaw():
            yield f"reaction '{reaction.getId()}' without a kinetic law"


_Own = dict[str, tuple[Prior, str]]
"""Parameters of one rate: prior, and the identifier under which the whole model shares it."""


class _Reader:
    """Turns species and reactions into nodes and edges."""

    def __init__(self, model: Any, name: str) -> None:
        self.model = model
        self.name = name
        self.trouble: list[str] = []
        self._names: dict[str, str] = {}
        self._owners: dict[str, str] = {}

    def mechanism(self) -> Mechanism:
        """Return the mechanism; what could not be turned is listed in ``trouble``."""
        model = self.model
        nodes = {}
        for species in _each(model.getListOfSpecies()):
            node = self._node(species)
            nodes[node.name] = node
        edges: dict[str, Edge] = {}
        priors: dict[str, Prior] = {}
        for reaction in _each(model.getListOfReactions()):
            if not reaction.isSetKineticLaw():
                continue
            try:
                edge, own = self._edge(reaction)
            except NotUnderstoodError as error:
                self.trouble.append(f"{error} of reaction '{reaction.getId()}'")
                continue
            if edge.sources or edge.targets:
                edges[edge.name] = edge
                priors |= own
        return Mechanism(
            title=model.getName() or model.getId() or self.name,
            time_unit=_time_unit(model),
            amount_unit="amount",
            nodes=nodes,
            edges=edges,
            priors=priors,
        )

    def _called(self, identifier: str) -> str:
        """Return the name a species or reaction goes by here."""
        if identifier not in self._names:
            plain = re.sub(r"[^A-Za-z0-9_]", "_", identifier)[: LONGEST - 4]
            while plain in RESERVED or plain in self._names.values():
                plain += "_"
            self._names[identifier] = plain
        return self._names[identifier]

    def _size(self, species: Any) -> float:
        compartment = self.model.getCompartment(species.getCompartment())
        set_size = compartment is not None and compartment.isSetSize()
        return float(compartment.getSize()) if set_size else 1.0

    def _node(self, species: Any) -> Node:
        identifier = species.getId()
        start = 0.0
        if species.isSetInitialAmount():
            start = float(species.getInitialAmount())
        elif species.isSetInitialConcentration():
            start = float(species.getInitialConcentration()) * self._size(species)
        else:
            self.trouble.append(f"species '{identifier}' without an initial amount")
        name = self._called(identifier)
        if _held(species):
            return Node(name, "input", resting=start)
        return Node(name, "pool", start=start)

    def _edge(self, reaction: Any) -> tuple[Edge, dict[str, Prior]]:
        name = self._called(reaction.getId())
        law = reaction.getKineticLaw()
        local = {p.getId(): p for p in _local_parameters(law)}
        own: _Own = {}

        def meaning(identifier: str) -> Expr:
            if identifier in local:
                return self._parameter(identifier, local[identifier], "", own)
            species = self.model.getSpecies(identifier)
            if species is not None:
                level: Expr = sym(self._called(identifier))
                # A species in concentrations means its amount over the compartment's size.
                return level if species.getHasOnlySubstanceUnits() else level / self._size(species)
            compartment = self.model.getCompartment(identifier)
            if compartment is not None:
                return const(float(compartment.getSize()) if compartment.isSetSize() else 1.0)
            parameter = self.model.getParameter(identifier)
            if parameter is None:
                raise NotUnderstoodError(f"'{identifier}' in the kinetic law")
            return self._parameter(identifier, parameter, identifier, own)

        if not law.isSetMath():
            raise NotUnderstoodError("a kinetic law without a formula")
        rate = from_mathml(law.getMath(), meaning)
        edge = Edge(
            name=name,
            sources=self._side(reaction.getListOfReactants()),
            targets=self._side(reaction.getListOfProducts()),
            effects=("converts",),
            rates=(("", to_text(rate)),),
        )
        used = symbols(rate)
        return edge, self._priors(name, {n: o for n, o in own.items() if n in used})

    def _parameter(self, identifier: str, parameter: Any, shared: str, own: _Own) -> Expr:
        """Return the symbol of a parameter, and note its prior."""
        if not parameter.isSetValue():
            raise NotUnderstoodError(f"parameter '{identifier}' without a value")
        name = identifier
        while name in RESERVED or name in self._node_names():
            name += "_"
        value = float(parameter.getValue())
        own[name] = (LogNormal(value, FOLD) if value > 0.0 else Fixed(value), shared)
        return sym(name)

    def _node_names(self) -> set[str]:
        return {self._called(s.getId()) for s in _each(self.model.getListOfSpecies())}

    def _priors(self, edge: str, own: _Own) -> dict[str, Prior]:
        """Return priors in which a parameter of the whole model is free once and tied elsewhere."""
        found: dict[str, Prior] = {}
        for name, (prior, shared) in own.items():
            owner = self._owners.setdefault(shared, f"{edge}.{name}") if shared else ""
            tied = owner not in ("", f"{edge}.{name}") and isinstance(prior, LogNormal)
            found[f"{edge}.{name}"] = Tied(owner) if tied else prior
        return found

    def _side(self, references: Any) -> tuple[tuple[str, float], ...]:
        """Return what a side of a reaction moves; species held constant are not moved."""
        amounts: dict[str, float] = {}
        for reference in _each(references):
            species = self.model.getSpecies(reference.getSpecies())
            if reference.isSetStoichiometryMath():
                raise NotUnderstoodError("a computed stoichiometry")
            count = reference.getStoichiometry()
            if not count > 0.0:
                raise NotUnderstoodError(f"a stoichiometry of {count:g}")
            if species is not None and not _held(species):
                name = self._called(reference.getSpecies())
                amounts[name] = amounts.get(name, 0.0) + float(count)
        return tuple(amounts.items())


def _each(items: Any) -> Iterable[Any]:
    return (items.get(i) for i in range(items.size()))


def _held(species: Any) -> bool:
    return bool(species.getBoundaryCondition() or species.getConstant())


def _local_parameters(law: Any) -> Iterable[Any]:
    yield from _each(law.getListOfLocalParameters())
    yield from _each(law.getListOfParameters())


def _time_unit(model: Any) -> str:
    definition = model.getUnitDefinition(model.getTimeUnits() or "time")
    if definition is not None and definition.getNumUnits() == 1:
        unit = definition.getUnit(0)
        seconds = unit.getMultiplier() * 10.0 ** unit.getScale()
        if unit.isSecond() and seconds in SECONDS:
            return SECONDS[seconds]
    return "s" if model.getTimeUnits() in ("second", "") else "time"
