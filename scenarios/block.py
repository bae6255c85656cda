"""What all blocks of a scenario file share: unknown keys are errors, blocks are frozen, docstrings are the docs."""

from typing import Any

from pydantic import BaseModel, ConfigDict, model_validator

from .quantities import refuse


class Block(BaseModel):
    """A map with a fixed set of keys."""

    model_config = ConfigDict(
        extra="forbid", frozen=True, use_attribute_docstrings=True, coerce_numbers_to_str=True, populate_by_name=False
    )


def exactly_one(*names: str) -> Any:
    """A check that exactly one of several keys is given."""

    def check(block: Any) -> Any:
        given = [n for n in names if getattr(block, n) is not None]
        if len(given) != 1:
            listed = ", ".join(names[:-1]) + (f" and {names[-1]}" if len(names) > 1 else names[-1])
            found = f"; received {' and '.join(given)}" if given else ""
            refuse("exactly-one", f"needs exactly one of {listed}{found}")
        return block

    return model_validator(mode="after")(check)
