# Radiance to brightness temperature. The project folder holds the job file, the scene description and
# the rasters they name; job and scene are paths within it.
cwlVersion: v1.2
class: CommandLineTool
label: Radiance to brightness temperature
baseCommand: [groundglow, brightness-temperature]
arguments:
  - $(inputs.project.path)/$(inputs.job)
  - {prefix: --scene, valueFrom: $(inputs.project.path)/$(inputs.scene)}
  - {prefix: --radiance, valueFrom: $(inputs.radiance.path)}
  - {prefix: --output, valueFrom: brightness_temperature}
  - --quiet
inputs:
  project: Directory
  job: string
  scene: string
  radiance: Directory
outputs:
  folder:
    type: Directory
    outputBinding: {glob: brightness_temperature}
# 75: another process makes the same folder.
temporaryFailCodes: [75]
permanentFailCodes: [2, 3]
