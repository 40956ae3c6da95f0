# Longwave flux and its uncertainty. The project folder holds the job file, the scene description and
# the rasters they name; job and scene are paths within it.
cwlVersion: v1.2
class: CommandLineTool
label: Longwave flux and its uncertainty
baseCommand: [groundglow, flux]
arguments:
  - $(inputs.project.path)/$(inputs.job)
  - {prefix: --scene, valueFrom: $(inputs.project.path)/$(inputs.scene)}
  - {prefix: --surface-temperature, valueFrom: $(inputs.surface_temperature.path)}
  - {prefix: --emissivity, valueFrom: $(inputs.emissivity.path)}
  - {prefix: --output, valueFrom: flux}
  - --quiet
inputs:
  project: Directory
  job: string
  scene: string
  surface_temperature: Directory
  emissivity: Directory
outputs:
  folder:
    type: Directory
    outputBinding: {glob: flux}
# 75: another process makes the same folder.
temporaryFailCodes: [75]
permanentFailCodes: [2, 3]
