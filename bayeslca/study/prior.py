"""An expert's judgement as a prior: the statement to paste, and what it says."""

from __future__ import annotations

from bayeslca.exceptions import StatementError
from bayeslca.model.elicitation import beta_from_most_likely, describe_beta
from bayeslca.model.statements.notation import parse
from bayeslca.model.statements.syntax import Prior

ANY_TARGET = "P(item=answer | class)"


def beta_prior(
    most_likely: float,
    *,
    above: float | None = None,
    below: float | None = None,
    sure: float,
    target: str | None = None,
) -> str:
    """Return a Beta prior as the statement to paste, with its 5, 50 and 95 % points.

    Parameters
    ----------
    most_likely : float
    above, below : float, optional
        One of them: the probability is above (below) it ...
    sure : float
        ... with this probability.
    target : str, optional
        What the prior is of, such as ``P(fees=yes | managed)``.

    Raises
    ------
    ModelError
        When no such Beta exists.
    StatementError
        When the target cannot be read.
    """
    a, b = beta_from_most_likely(most_likely, above=above, below=below, sure=sure)
    # Said of the numbers as printed: the points are those of what is pasted
    prior = describe_beta(float(f"{a:.4g}"), float(f"{b:.4g}"))
    statement = prior.statement(ANY_TARGET if target is None else _checked(target))
    lines = [
        statement,
        "",
        f"  5 % of it lie below   {prior.lower:.3f}",
        f"  50 % of it lie below  {prior.median:.3f}",
        f"  95 % of it lie below  {prior.upper:.3f}",
        "",
        f"It counts for {prior.a + prior.b:.3g} cases of the class.",
    ]
    if target is None:
        lines.append("Put your own item, answer and class into it, or give --target.")
    return "\n".join(lines)


def _checked(target: str) -> str:
    """Return the target if it is the probability of one answer in a class."""
    target = target.strip()
    stated = parse(f"{target} ~ Beta(1, 1)")
    if (
        not isinstance(stated, Prior)
        or len(stated.probability.events) != 1
        or not stated.probability.given
    ):
        msg = "a Beta prior is of one answer's probability in a class"
        raise StatementError(
            msg,
            statement=target,
            position=0,
            remedy=f"Write {ANY_TARGET}; prevalences have one Dirichlet prior for all classes.",
        )
    return target
