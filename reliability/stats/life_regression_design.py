"""The columns of a life regression: checked, put on one scale, and refused where they cannot be told apart."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import optimize

from reliability.stats.errors import CollinearCovariates, InvalidArgument, InvalidLifetimes, UndefinedEstimate
from reliability.stats.lifetimes import FloatArray, Lifetimes

INTERCEPT = "intercept"
# smaller singular values of the scaled columns mean that one follows from the others
DEPENDENT = 1e-7


@dataclass(frozen=True, eq=False)
class Design:
    """A column of ones and the covariates, centred and scaled: matrix (n, p); to_outer (p, p) undoes that."""

    names: tuple[str, ...]
    matrix: FloatArray
    to_outer: FloatArray

    def outer(self, inner: FloatArray) -> FloatArray:
        """Coefficients of the covariates as given from those of the scaled columns, shape (p,)."""
        return self.to_outer @ inner

    def inner_direction(self, direction: FloatArray) -> FloatArray:
        """direction @ outer coefficients as a direction of the inner ones, shape (p,)."""
        return self.to_outer.T @ direction


def design_of(
    lifetimes: Lifetimes, covariates: Mapping[str, ArrayLike] | ArrayLike, names: Sequence[str] | None
) -> Design:
    """Validated once. Raises InvalidArgument, InvalidLifetimes (a row's value), CollinearCovariates."""
    table, labels = _table(lifetimes, covariates, names)
    weights = lifetimes.weights / lifetimes.count
    middle = weights @ table
    spread = np.sqrt(weights @ (table - middle) ** 2)
    constant = spread <= 1e-10 * np.maximum(np.abs(middle), 1e-300)
    if constant.any():
        which = tuple(label for label, same in zip(labels, constant, strict=True) if same)
        raise CollinearCovariates(
            f"{_listed(which)} the same for all lives, so no effect can be seen. Leave it out, or choose more lives.",
            names=which,
        )
    scaled = (table - middle) / spread
    _refuse_dependent(scaled * np.sqrt(weights)[:, None], labels)
    size = len(labels) + 1
    to_outer = np.zeros((size, size))
    to_outer[0, 0] = 1.0
    to_outer[0, 1:] = -middle / spread
    to_outer[1:, 1:] = np.diag(1.0 / spread)
    return Design(labels, np.column_stack([np.ones(len(lifetimes)), scaled]), to_outer)


def _table(
    lifetimes: Lifetimes, covariates: Mapping[str, ArrayLike] | ArrayLike, names: Sequence[str] | None
) -> tuple[FloatArray, tuple[str, ...]]:
    if isinstance(covariates, Mapping):
        if names is not None:
            raise InvalidArgument("Names are given twice. Give either a mapping of columns, or an array with names.")
        labels = tuple(str(name) for name in covariates)
        columns = [_numbers(values, label) for label, values in zip(labels, covariates.values(), strict=True)]
        wrong = [label for label, column in zip(labels, columns, strict=True) if column.shape != (len(lifetimes),)]
        if wrong:
            raise InvalidArgument(f"The covariate {wrong[0]} must have one value for each of {len(lifetimes)} lives.")
        table = np.column_stack(columns) if columns else np.zeros((len(lifetimes), 0))
    else:
        table = _numbers(covariates, "the covariates")
        table = table[:, None] if table.ndim == 1 else table
        if table.ndim != 2 or table.shape[0] != len(lifetimes):
            raise InvalidArgument(
                f"The covariates have shape {table.shape}; they must have one row for each of {len(lifetimes)} lives."
            )
        labels = tuple(names) if names is not None else tuple(f"x{j + 1}" for j in range(table.shape[1]))
    if len(labels) != table.shape[1] or len(set(labels)) != len(labels) or INTERCEPT in labels:
        raise InvalidArgument(
            f"{table.shape[1]} covariates need as many different names other than {INTERCEPT!r}; got {list(labels)}."
        )
    if not labels:
        raise InvalidArgument("No covariate is given. Give at least one, or use fit_weibull.")
    bad = np.argwhere(~np.isfinite(table))
    if bad.size:
        row, column = (int(place) for place in bad[0])
        raise InvalidLifetimes(
            f"Row {row}: {labels[column]} is not a number. Leave the life out, or enter the value.", row=row
        )
    return table, labels


def _numbers(values: ArrayLike, name: str) -> FloatArray:
    array = np.asarray(values)
    if array.dtype.kind not in "biuf":
        raise InvalidArgument(f"The values of {name} must be numbers; give a factor as columns of 0 and 1.")
    return array.astype(float)


def _refuse_dependent(scaled: FloatArray, labels: tuple[str, ...]) -> None:
    # the triangle of a tall table has its singular values, and no side as long as the lives
    _, sizes, vectors = np.linalg.svd(np.linalg.qr(scaled, mode="r"), full_matrices=True)
    small = np.append(sizes, np.zeros(max(len(labels) - sizes.size, 0))) < DEPENDENT
    if small.any():
        shares = np.abs(vectors[small]).max(axis=0)
        which = tuple(label for label, share in zip(labels, shares, strict=True) if share > 1e-4)
        raise CollinearCovariates(
            f"The covariates {', '.join(which)} follow from one another in these lives, so their "
            "effects cannot be told apart. Leave out one of them.",
            names=which,
        )


def refuse_separation(lifetimes: Lifetimes, design: Design) -> None:
    """Raise where some change of the coefficients makes every withdrawn life likelier and no failed one less likely.

    Then the likelihood rises for ever: a duty that no failed part had, for example. Such a change leaves the expected
    life of every failure with two known ends as it is, raises no failure's known only to be early, and lowers no
    withdrawn life's. A linear programme looks for it where the failures alone do not rule it out. Albert & Anderson,
    Biometrika 71 (1984) 1-10 (for logistic regression).
    """
    matrix = design.matrix
    early = lifetimes.is_interval & (lifetimes.last_good <= lifetimes.entries)
    fixed = lifetimes.observed & ~early
    if np.linalg.matrix_rank(np.linalg.qr(matrix[fixed], mode="r")) == matrix.shape[1]:
        return
    up = np.unique(np.concatenate([matrix[~lifetimes.observed], -matrix[early]]), axis=0)
    held = np.unique(matrix[fixed], axis=0)
    found = optimize.linprog(
        -up.sum(axis=0),
        A_ub=-up,
        b_ub=np.zeros(up.shape[0]),
        A_eq=held if held.size else None,
        b_eq=np.zeros(held.shape[0]) if held.size else None,
        bounds=(-1.0, 1.0),
    )
    if found.status == 0 and -found.fun > 1e-7:
        change = np.abs(design.outer(found.x)[1:]) * np.abs(1.0 / np.diag(design.to_outer)[1:])
        which = [name for name, size in zip(design.names, change, strict=True) if size > 1e-6]
        raise UndefinedEstimate(
            f"The failures say only on which side the effect of {' and '.join(which) or 'the covariates'} lies: some "
            "value of it never failed, or always did. Leave it out, join it with another value, or wait for failures."
        )


def _listed(names: tuple[str, ...]) -> str:
    return f"The covariate {names[0]} is" if len(names) == 1 else f"The covariates {', '.join(names)} are"
