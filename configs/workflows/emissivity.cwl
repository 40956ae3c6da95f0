# Emissivity of the ground. The project folder holds the job file, the scene description and
# the rasters they name; job and scene are paths within it.
cwlVersion: v1.2
class: CommandLineTool
label: Emissivity of the ground
baseCommand: [groundglow, emissivity]
arguments:
  - $(inputs.project.path)/$(inputs.job)
  - {prefix: --scene, valueFrom: $(inputs.project.path)/$(inputs.scene)}
  - {prefix: --output, valueFrom: emissivity}
  - --quiet
inputs:
  project: Directory
  job: string
  scene: string
outputs:
  folder:
    type: Directory
    outputBinding: {glob: emissivity}
# 75: another process makes the same folder.
temporaryFailCodes: [75]
permanentFailCodes: [2, 3]
