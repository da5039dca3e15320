"""Keys of ``sampling``: how long and how the walkers run."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, ValidationInfo, field_validator

from mcgeo.runs.config_types import Count, Group, Positive, Real, WholeNumber, rule

ENERGY, STRETCH = "energy", "stretch"
DEFAULT_LIMIT = 32
# Block means of S(q) are a megabyte a block for a middling liquid.
_MOST_BLOCKS = 1024


class SamplingConfig(Group):
    """Walkers, their length and what is kept of them."""

    walkers: Count = Field(default=32, description="Independent walkers [1].")
    sweeps: Count = Field(
        default=20_000, description="Production sweeps of each walker; a sweep visits every particle once [1]."
    )
    equilibration: Annotated[int, WholeNumber(0)] = Field(
        default=500, description="Sweeps of each walker before production [1]."
    )
    blocks: Annotated[int, WholeNumber(2)] = Field(
        default=16, description="Block means kept of each walker [1]."
    )
    measure_every: Count | None = Field(
        default=None,
        description="Sweeps from one measurement to the next; null: the state's own default [1].",
    )
    step: Positive | None = Field(
        default=None, description="Side of the square a move is drawn from; null: tuned [l_B]."
    )
    seed: Annotated[int, WholeNumber(0)] | None = Field(
        default=1, description="Seed of all random numbers; null: drawn once and recorded [1]."
    )
    threads: Count | None = Field(
        default=None,
        description="Threads; null: the cores this process may use. Results do not depend on it [1].",
    )
    checkpoint_seconds: Annotated[Real, Field(ge=0.0)] = Field(
        default=60.0,
        description="Time between two checkpoints of a running sampling; more when writing one takes over a "
        "twentieth of it. Results do not depend on it [s].",
    )
    q_max: Annotated[Real, Field(ge=4.0, le=12.0)] = Field(
        default=8.0, description="Largest wavevector, in the state's metric, of the structure factor [1/l_B]."
    )

    target_error: Positive | None = Field(
        default=None,
        description="Go on, block by block of sweeps/blocks sweeps, until the statistical error of target_quantity is "
        "this small; null: end after sweeps [energy: e^2/(4 pi eps l_B) per electron, stretch: 1].",
    )
    target_quantity: Literal["energy", "stretch"] | None = Field(
        default=None,
        description="What target_error is of: energy, the one of the infinite liquid or of the droplet that sample "
        "states, or stretch, that of the optimum of the problem; null with a target_error: energy.",
    )
    most_sweeps: Count | None = Field(
        default=None,
        description="Sweeps of each walker after which a run with a target_error ends all the same; null: "
        f"{DEFAULT_LIMIT} times sweeps [1].",
    )

    @field_validator("blocks")
    @classmethod
    def _no_empty_block(cls, blocks: int, info: ValidationInfo) -> int:
        sweeps = info.data.get("sweeps", blocks)
        if blocks > sweeps:
            raise rule(f"must not exceed sweeps, which is {sweeps}, but is {blocks}")
        return blocks

    @field_validator("measure_every")
    @classmethod
    def _each_block_measured(cls, measure_every: int | None, info: ValidationInfo) -> int | None:
        if measure_every is None or not {"sweeps", "blocks"} <= info.data.keys():
            return measure_every
        longest = info.data["sweeps"] // info.data["blocks"]
        if measure_every > longest:
            raise rule(
                f"must be at most sweeps/blocks = {longest}, so that every block holds a measurement, "
                f"not {measure_every}"
            )
        return measure_every

    @field_validator("target_quantity")
    @classmethod
    def _of_a_target(cls, quantity: str | None, info: ValidationInfo) -> str | None:
        if "target_error" not in info.data:
            return quantity
        if info.data["target_error"] is not None:
            return quantity or ENERGY
        if quantity is not None:
            raise rule("goes with target_error only; give that too, or remove this")
        return None

    @field_validator("most_sweeps")
    @classmethod
    def _limit_of_a_target(cls, most: int | None, info: ValidationInfo) -> int | None:
        if not {"sweeps", "blocks", "target_error"} <= info.data.keys():
            return most
        sweeps, blocks = info.data["sweeps"], info.data["blocks"]
        if info.data["target_error"] is None:
            if most is not None:
                raise rule("goes with target_error only; without one the run ends after sweeps")
            return None
        limit = DEFAULT_LIMIT * sweeps if most is None else most
        if limit < sweeps:
            raise rule(f"must be at least sweeps, which is {sweeps}, not {most}")
        block = -(-sweeps // blocks)
        if -(-limit // block) > _MOST_BLOCKS:
            told = f"not {most}" if most is not None else f"and its default is {DEFAULT_LIMIT} times sweeps"
            raise rule(
                f"must be at most {_MOST_BLOCKS} blocks of sweeps/blocks = {block} sweeps, which is "
                f"{_MOST_BLOCKS * block}, {told}; a file of longer ones is smaller: lower blocks or raise sweeps"
            )
        return limit
