"""What a scenario may hold: bounds of the new parts, and defaults that change nothing."""

import pytest
from pydantic import ValidationError

from runner.rehearse.scenario_shapes import BandsShape, DefectsShape, PatchShape, StationShape, UnitShape


def test_a_unit_without_a_word_has_no_flaw() -> None:
    """Whatever is not stated is sound: no bands, no defects, no correction, files as they should be."""
    unit = UnitShape.model_validate({"story": "good", "blur": "1 um"})

    assert (unit.bands, unit.defects, unit.shading_correction, unit.files) == (None, DefectsShape(), "none", "none")
    assert (unit.readout, unit.lamp, unit.lens_shift) == ("live", "lit", (0.0, 0.0))


@pytest.mark.parametrize(
    ("shape", "content", "told"),
    [
        (BandsShape, {"along": "rows", "amplitude": "2 DN", "frequency": "0.6 cy/px"}, "less than or equal to 0.5"),
        (BandsShape, {"along": "both", "amplitude": "2 DN", "frequency": "0.1 cy/px"}, "'rows' or 'columns'"),
        (DefectsShape, {"hot": -1}, "greater than or equal to 0"),
        (DefectsShape, {"weakness": "0 %"}, "greater than 0"),
        (PatchShape, {"place": ["0 mm", "0 mm"], "period": "0 mm", "direction": "3 deg"}, "greater than 0"),
        (StationShape, {"packing": "MIPI RAW12", "sidecar": {}}, "'12 bit low bits first' or"),
        (StationShape, {"sidecar": {"weather": "fine"}}, "'exposure', 'gain' or 'temperature'"),
        (UnitShape, {"story": "x", "blur": "1 um", "files": "lost"}, "'none', 'other packing' or 'half copied'"),
        (UnitShape, {"story": "x", "blur": "1 um", "shading_correction": "twice"}, "'none', 'right' or 'mirrored'"),
    ],
)
def test_what_cannot_be_is_refused(shape: type[UnitShape], content: dict[str, object], told: str) -> None:
    """Each part keeps inside its meaning, and says what is allowed."""
    with pytest.raises(ValidationError, match=told):
        shape.model_validate(content)
