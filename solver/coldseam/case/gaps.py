"""Bodies of air that are solved as conducting bodies: closed cavities and layers."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Annotated, Any, Literal

from pydantic import Field, ValidationInfo, WithJsonSchema, WrapValidator

from coldseam.case.tables import Context, Table, Trouble
from coldseam.case.values import Amount, Numbers


class AirGap(Table):
    """How the air in a body passes heat on: by an equivalent conductivity that follows from the answer."""

    method: Literal["cavity", "layer"] | None = Field(
        None,
        description="cavity: ISO 10077-2, in a cross-section; layer: ISO 6946; cavity in two dimensions if not given",
    )
    emissivities: Annotated[tuple[float, float], Numbers(Amount("ratio", above=0.0, at_most=1.0), 2)] = Field(
        (0.9, 0.9), description="of the two faces that the heat flows between"
    )
    heat_flow: Literal["up", "horizontal", "down"] | None = Field(None, description="layer: its direction")
    ventilation: Literal["none", "slight"] = Field("none", description="layer: slight halves its resistance")

    def check(self, context: Context) -> Iterator[Trouble]:
        """Yield what a method needs or has no use for."""
        if self.method == "cavity" and context.dim == 3:
            yield (
                ("method",),
                'the cavities of ISO 10077-2 are cross-sections; in three dimensions use method = "layer"',
            )
        layer = self.method == "layer" or (self.method is None and context.dim == 3)
        if layer and self.heat_flow is None:
            yield ("heat_flow",), 'is required for a layer: "up", "horizontal" or "down"'
        if not layer and self.heat_flow is not None:
            yield ("heat_flow",), "goes with layer; a cavity takes it from the answer"
        if not layer and self.ventilation != "none":
            yield ("ventilation",), "goes with layer"

    def method_in(self, dim: int) -> str:
        """Return the method in so many dimensions."""
        return self.method or ("cavity" if dim == 2 else "layer")


def _gap(value: Any, handler: Any, info: ValidationInfo) -> Any:
    """Read ``true`` or a table."""
    if isinstance(value, AirGap):
        return value
    if value is False or not isinstance(value, (bool, dict)):
        raise ValueError("expected true, or a table such as { emissivities = [0.9, 0.1] }")
    return AirGap.model_validate({} if value is True else value, context=info.context)


Gap = Annotated[AirGap, WrapValidator(_gap), WithJsonSchema({"anyOf": [{"const": True}, {"type": "object"}]})]
