# Counts to spectral radiance, and flags. The project folder holds the job file, the scene description and
# the rasters they name; job and scene are paths within it.
cwlVersion: v1.2
class: CommandLineTool
label: Counts to spectral radiance, and flags
baseCommand: [groundglow, radiance]
arguments:
  - $(inputs.project.path)/$(inputs.job)
  - {prefix: --scene, valueFrom: $(inputs.project.path)/$(inputs.scene)}
  - {prefix: --output, valueFrom: radiance}
  - --quiet
inputs:
  project: Directory
  job: string
  scene: string
outputs:
  folder:
    type: Directory
    outputBinding: {glob: radiance}
# 75: another process makes the same folder.
temporaryFailCodes: [75]
permanentFailCodes: [2, 3]
