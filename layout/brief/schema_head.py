"""[head] of the brief."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Literal

from pydantic import Field, model_validator

from layout.brief.default_heads import DEFAULT_CORTEX_DEPTH, DEFAULT_RADII
from layout.brief.objects import Model, SourceMesh
from layout.brief.schema_common import UNSET, FromList, Radius, broken_rule
from layout.brief.schema_own_head import FileName, OwnHeadForm, check_own_head
from layout.units import MM

Conductivity = Annotated[float, Field(ge=1e-5, le=100)]


class HeadForm(OwnHeadForm):
    """[head]"""

    kind: Literal["template", "sphere", "surfaces"]
    layers: Annotated[int, Field(ge=3, le=4)] = UNSET
    conductivities_s_per_m: Annotated[tuple[Conductivity, ...], FromList, Field(min_length=3, max_length=4)] = UNSET
    source_mesh: SourceMesh = UNSET
    radii_mm: Annotated[tuple[Radius, ...], FromList, Field(min_length=3, max_length=4)] = UNSET
    cortex_depth_mm: Annotated[float, Field(gt=0)] = UNSET
    model: Model = UNSET
    nodes: Annotated[int, Field(ge=300, le=5000)] = UNSET
    lead_field_file: FileName = UNSET

    @property
    def n_layers(self) -> int:
        """Number of layers, said outright or by the length of a list; 3 when nothing says it."""
        return self.layers or len(self.conductivities_s_per_m or self.radii_mm or (0, 0, 0))

    @property
    def chosen_model(self) -> Model:
        """What computes lead fields: boundary elements wherever they can, unless the file says otherwise."""
        fits = self.kind != "sphere" and self.n_layers == 3
        return self.model or ("boundary_elements" if fits else "spheres")

    @model_validator(mode="after")
    def _check(self) -> HeadForm:
        check_own_head(self, self.kind)
        if self.model == "boundary_elements" and self.kind == "sphere":
            raise broken_rule('must be "spheres" where head.kind is "sphere" (its spheres are exact)', "model")
        if self.model == "boundary_elements" and self.n_layers != 3:
            raise broken_rule('must be "spheres" for a head of 4 layers (boundary elements have 3)', "model")
        if self.nodes is not UNSET and self.chosen_model != "boundary_elements":
            raise broken_rule('must be left out unless head.model is "boundary_elements"', "nodes")
        if self.kind == "surfaces" and self.source_mesh is not UNSET:
            raise broken_rule("must be left out for own surfaces (head.cortex_sources says how many)", "source_mesh")
        for key in ("radii_mm", "cortex_depth_mm"):
            if self.kind != "sphere" and getattr(self, key) is not UNSET:
                raise broken_rule('must be left out unless head.kind is "sphere"', key)
        for key in ("conductivities_s_per_m", "radii_mm"):
            values = getattr(self, key)
            if values is not UNSET and len(values) != self.n_layers:
                raise broken_rule(f"must have one value for each of the {self.n_layers} layers", key)
        radii = self.radii_mm or tuple(radius / MM for radius in DEFAULT_RADII[self.n_layers])
        if any(b <= a for a, b in pairwise(radii)):
            raise broken_rule("must be increasing from the brain outwards", "radii_mm")
        depth = DEFAULT_CORTEX_DEPTH / MM if self.cortex_depth_mm is UNSET else self.cortex_depth_mm
        if self.kind == "sphere" and depth >= radii[0]:
            left_out = f"left out: {DEFAULT_CORTEX_DEPTH / MM:g}"
            rule = f"must be less than the innermost radius of {radii[0]:g} mm ({left_out})"
            raise broken_rule(rule, "cortex_depth_mm", value=depth)
        return self
