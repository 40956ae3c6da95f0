"""What a stage command knows: job and scene file, resolved as far as that stage needs and no further.

A stage must not depend on inputs that it does not use: the radiance does not wait for the sounding,
nor the air for the emissivity. What a stage leaves aside is replaced by its plainest form before the
scene is planned.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from groundglow.errors import ConfigError
from groundglow.run.config.atmosphere import BandAir, ExplicitAtmosphere, NoAtmosphere
from groundglow.run.config.emissivity import ConstantEmissivity
from groundglow.run.config.job import Job, read_job
from groundglow.run.planning.plan import ScenePlan, plan_scene
from groundglow.run.stage.record import StageFolder, StageName, agree, read_stage
from groundglow.scene.model import Scene
from groundglow.scene.open import open_scene

_WITHOUT_STAGE = {
    "none": "the job wants no air",
    "column": "the water-vapour method looks at the column alone",
}
_BLACK = ConstantEmissivity(source="constant", value=1.0)


@dataclass(frozen=True)
class StageCall:
    """The arguments that every stage command has.

    Attributes
    ----------
    job : Path
        Job file: the choices.
    scene : str
        Scene description.
    output : Path
        Folder to write.
    workers : int or None
        Threads.
    """

    job: Path
    scene: str
    output: Path
    workers: int | None = None


@dataclass(frozen=True, eq=False)
class Setting:
    """A stage call, with its job and scene read.

    Attributes
    ----------
    call : StageCall
    job : Job
    scene : Scene
    """

    call: StageCall
    job: Job
    scene: Scene

    @staticmethod
    def read(call: StageCall) -> Setting:
        """Read job and scene file.

        Raises
        ------
        ConfigError
            If one of them cannot be followed.
        """
        return Setting(call, read_job(call.job), open_scene(call.scene))

    def plan(self) -> ScenePlan:
        """Everything the job asks for."""
        return self._planned(self.job)

    def plan_before_ground(self) -> ScenePlan:
        """Radiance and brightness temperature: neither air nor emissivity."""
        # The layers that need air cannot be planned without it; no stage reads them from the plan.
        return self._planned(self.job.model_copy(update={"atmosphere": NoAtmosphere(source="none")}))

    def plan_of_ground(self) -> ScenePlan:
        """Emissivity and temperature's settings, with nothing between ground and sensor."""
        nothing = tuple(
            BandAir(band=band.number, transmittance=(1.0,), path_radiance=(0.0,), sky_radiance=(0.0,))
            for band in self.scene.thermal
        )
        empty = ExplicitAtmosphere(
            source="explicit", reference="no air: another stage brings it", air=nothing
        )
        return self._planned(self.job.model_copy(update={"atmosphere": empty}))

    def plan_of_air(self) -> ScenePlan:
        """The air alone, over black ground.

        Raises
        ------
        ConfigError
            If the job wants none.
        """
        if self.job.atmosphere.source in _WITHOUT_STAGE:
            raise ConfigError(
                f"{_WITHOUT_STAGE[self.job.atmosphere.source]}, so that there is no atmosphere to make",
                where=f"{self.call.job}: atmosphere",
                remedy="Leave this stage out",
            )
        return self._planned(self.job.model_copy(update={"emissivity": _BLACK}))

    def given(self, path: Path, stage: StageName, plan: ScenePlan) -> StageFolder:
        """The output of an earlier stage, checked to be that stage's and of this scene, band and grid.

        Raises
        ------
        InputError
            If it is not.
        """
        folder = read_stage(path, stage, f"--{stage}")
        agree([folder], plan)
        return folder

    def _planned(self, job: Job) -> ScenePlan:
        return plan_scene(job, self.call.job.parent, self.scene)
