"""From a mechanism with contested parts to its variants."""

from __future__ import annotations

from ruleout.experiments.types import Experiments
from ruleout.mechanism.types import Mechanism
from ruleout.variants.claims import find_claims
from ruleout.variants.contests import find_contests
from ruleout.variants.expansion import expand_wirings
from ruleout.variants.graph import arcs
from ruleout.variants.loops import find_loops
from ruleout.variants.neighbours import find_neighbours
from ruleout.variants.nesting import Nesting
from ruleout.variants.reach import effective, read_nodes
from ruleout.variants.types import Contest, Option, Variant, VariantSet


def _position(contest: Contest, option: Option) -> int:
    """Return where an option stands in its contest; one forced to be absent stands last."""
    return contest.options.index(option) if option in contest.options else len(contest.options)


def expand(mechanism: Mechanism, experiments: Experiments) -> VariantSet:
    """Settle every contested choice in every admissible way.

    Parameters
    ----------
    mechanism : Mechanism
    experiments : Experiments
        Its readouts and conditions decide what is out of reach of these data.

    Returns
    -------
    VariantSet
        A mechanism with nothing in dispute has the one variant ``v1``.

    Raises
    ------
    InputError
        If there are more than 512 variants, or if the rules leave none.
    """
    contests = find_contests(mechanism)
    drafts = expand_wirings(mechanism, contests)
    nested = Nesting(mechanism, contests, read_nodes(experiments)).relation(drafts)

    def size(i: int) -> tuple[int, int, tuple[int, ...]]:
        chosen = drafts[i].choices
        return (
            sum(option.present for option in chosen.values()),
            len(nested[i]),
            tuple(_position(contest, chosen[contest.name]) for contest in contests),
        )

    order = sorted(range(len(drafts)), key=size)
    width = len(str(len(drafts)))
    names = {i: f"v{rank:0{width}d}" for rank, i in enumerate(order, start=1)}
    found = {i: arcs(drafts[i].wiring) for i in order}
    loops = dict(zip(order, find_loops([found[i] for i in order]), strict=True))
    variants = {
        names[i]: Variant(names[i], drafts[i].choices, drafts[i].wiring, loops[i]) for i in order
    }
    reach = [effective(draft.wiring, found[i], experiments) for i, draft in enumerate(drafts)]
    near = find_neighbours(contests, [draft.choices for draft in drafts], nested, reach)
    reached = frozenset().union(*reach)
    return VariantSet(
        mechanism=mechanism,
        contests=contests,
        variants=variants,
        contains={names[i]: frozenset(names[j] for j in nested[i]) for i in order},
        neighbours={
            names[i]: {
                choice: tuple(sorted(names[j] for j in js)) for choice, js in near[i].items()
            }
            for i in order
        },
        claims=find_claims(mechanism, contests, list(variants.values())),
        out_of_reach=tuple(c.name for c in contests if c.name not in reached),
    )
