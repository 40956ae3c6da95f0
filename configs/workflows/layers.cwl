# The finished layers of one scene with its STAC Item. The project folder holds the job file, the scene description and
# the rasters they name; job and scene are paths within it.
cwlVersion: v1.2
class: CommandLineTool
label: Finished layers of one scene
baseCommand: [groundglow, layers]
arguments:
  - {position: 1, valueFrom: $(inputs.project.path)/$(inputs.job)}
  - {position: 3, prefix: --scene, valueFrom: $(inputs.project.path)/$(inputs.scene)}
  - {position: 3, prefix: --output, valueFrom: $(inputs.name)}
  - {position: 3, valueFrom: --quiet}
inputs:
  project: Directory
  job: string
  scene: string
  name: string
  stages:
    type: Directory[]
    inputBinding: {position: 2}
outputs:
  folder:
    type: Directory
    outputBinding: {glob: $(inputs.name)}
# 75: another process makes the same folder.
temporaryFailCodes: [75]
permanentFailCodes: [2, 3]
