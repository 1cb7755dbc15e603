"""Conductivity and specific heat as a case file gives them: numbers, directions, matrices and laws."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import ValidationError, WithJsonSchema

from coldseam.case.laws import ConductivityLaw, SpecificHeatLaw
from coldseam.case.tables import Context, Trouble, fail, troubles_of
from coldseam.case.values import Amount, Numbers, checked

Row = tuple[float, ...]
Components = tuple[float | ConductivityLaw, ...]
_VALUE = Amount("conductivity", above=0.0)
_ENTRY = Amount("conductivity")
_DIRECTION = Amount("ratio")
ALONG_UNIT = 1e-3
"""How far axes typed with few digits (0.7071) may be off unit length and right angles."""


class _Conductivity:
    """One number, two or three along the axes, each a number or a law, a symmetric matrix, or a law over temperature."""

    def read(self, value: Any, context: Context) -> float | Components | tuple[Row, ...] | ConductivityLaw:
        """Return the conductivity, W/(m K), in the form it was typed."""
        if isinstance(value, (dict, ConductivityLaw)):
            return ConductivityLaw.model_validate(value, context=context)
        if not isinstance(value, (list, tuple)):
            return _VALUE.read(value, context)
        if not value or any(isinstance(row, (list, tuple)) for row in value):
            return self._matrix(value, context)
        if len(value) not in (2, 3) or (context.dim == 3 and len(value) == 2):
            raise ValueError(f"expected one number, [kx, ky, kz] or a 3 x 3 matrix, not {len(value)} numbers")
        if any(isinstance(entry, (dict, ConductivityLaw)) for entry in value):
            return self._components(value, context)
        return Numbers(_VALUE, len(value)).read(value, context)

    def _components(self, value: Any, context: Context) -> Components:
        """Return numbers and laws along the axes."""
        troubles: list[Trouble] = []
        found: list[float | ConductivityLaw] = []
        for number, entry in enumerate(value):
            try:
                if isinstance(entry, (dict, ConductivityLaw)):
                    found.append(ConductivityLaw.model_validate(entry, context=context))
                else:
                    found.append(_VALUE.read(entry, context))
            except ValidationError as error:
                troubles += [((number, *place), what) for place, what in troubles_of(error)]
            except ValueError as error:
                troubles.append(((number,), str(error)))
        if troubles:
            raise fail("conductivity", troubles, value)
        return tuple(found)

    def _matrix(self, value: Any, context: Context) -> tuple[Row, ...]:
        import numpy as np

        size = len(value)
        if size not in (2, 3) or (context.dim == 3 and size == 2) or any(not isinstance(r, (list, tuple)) or
                                                                         len(r) != size for r in value):  # fmt: skip
            raise ValueError("expected a matrix of three rows of three numbers (two of two in a cross-section)")
        rows = tuple(Numbers(_ENTRY, size).read(row, context) for row in value)
        matrix = np.array(rows)
        largest = float(np.max(np.abs(matrix)))
        if not np.allclose(matrix, matrix.T, rtol=0.0, atol=1e-9 * largest):
            raise ValueError("the matrix must be symmetric")
        if float(np.min(np.linalg.eigvalsh(matrix))) <= 1e-12 * largest:
            raise ValueError(
                "the matrix must be positive definite: heat must flow from warm to cold in every direction"
            )
        return rows

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


class _Axes:
    """Rows that are unit vectors at right angles."""

    def read(self, value: Any, context: Context) -> tuple[Row, ...]:
        """Return the rows as typed; ValueError says which are off."""
        import numpy as np

        size = len(value) if isinstance(value, (list, tuple)) else 0
        if size not in (2, 3) or any(not isinstance(row, (list, tuple)) or len(row) != size for row in value):
            raise ValueError("expected three unit vectors of three numbers each (two of two in a cross-section)")
        rows = tuple(Numbers(_DIRECTION, size).read(row, context) for row in value)
        gram = np.array(rows) @ np.array(rows).T
        for i in range(size):
            if abs(gram[i, i] - 1.0) > 2 * ALONG_UNIT:
                raise ValueError(f"row {i + 1} must have unit length; it has {gram[i, i] ** 0.5:.4g}")
            for j in range(i):
                if abs(gram[i, j]) > ALONG_UNIT:
                    raise ValueError(f"rows {j + 1} and {i + 1} must be at right angles")
        return rows

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


_AMOUNT_SCHEMA = {"anyOf": [{"type": "number", "exclusiveMinimum": 0}, {"type": "string"}]}
_ROWS = {
    "type": "array",
    "minItems": 2,
    "maxItems": 3,
    "items": {"type": "array", "minItems": 2, "maxItems": 3, "items": {"type": ["number", "string"]}},
}
_CONDUCTIVITY_SCHEMA = {
    "anyOf": [
        *_AMOUNT_SCHEMA["anyOf"],
        {
            "type": "array",
            "minItems": 2,
            "maxItems": 3,
            "items": {"anyOf": [*_AMOUNT_SCHEMA["anyOf"], {"type": "object"}]},
        },
        _ROWS,
        {"type": "object"},
    ],
    "description": "W/(m·K): one number or a law over temperature, [kx, ky, kz] along the axes (each of them either), or a "
    "symmetric matrix",
}
Conductivity = Annotated[
    float | Components | tuple[Row, ...] | ConductivityLaw, _Conductivity(), WithJsonSchema(_CONDUCTIVITY_SCHEMA)
]
MaterialAxes = Annotated[
    tuple[Row, ...],
    _Axes(),
    WithJsonSchema(_ROWS | {"description": "rows: unit vectors of the directions that conductivity is given in"}),
]


class _SpecificHeat:
    """One number, or a law over temperature."""

    def read(self, value: Any, context: Context) -> float | SpecificHeatLaw:
        """Return the specific heat, J/(kg K)."""
        if isinstance(value, (dict, SpecificHeatLaw)):
            return SpecificHeatLaw.model_validate(value, context=context)
        return Amount("specific heat", above=0.0).read(value, context)

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> Any:
        return checked(self.read)


HeatOrLaw = Annotated[
    float | SpecificHeatLaw,
    _SpecificHeat(),
    WithJsonSchema(
        {"anyOf": [*_AMOUNT_SCHEMA["anyOf"], {"type": "object"}], "description": "J/(kg·K), or a law over temperature"}
    ),
]
