# Surface temperature and its uncertainty. The project folder holds the job file, the scene description and
# the rasters they name; job and scene are paths within it.
cwlVersion: v1.2
class: CommandLineTool
label: Surface temperature and its uncertainty
baseCommand: [groundglow, surface-temperature]
arguments:
  - $(inputs.project.path)/$(inputs.job)
  - {prefix: --scene, valueFrom: $(inputs.project.path)/$(inputs.scene)}
  - {prefix: --radiance, valueFrom: $(inputs.radiance.path)}
  - {prefix: --brightness-temperature, valueFrom: $(inputs.brightness_temperature.path)}
  - {prefix: --emissivity, valueFrom: $(inputs.emissivity.path)}
  - {prefix: --atmosphere, valueFrom: $(inputs.atmosphere.path)}
  - {prefix: --output, valueFrom: surface_temperature}
  - --quiet
inputs:
  project: Directory
  job: string
  scene: string
  radiance: Directory
  brightness_temperature: Directory
  emissivity: Directory
  atmosphere: Directory
outputs:
  folder:
    type: Directory
    outputBinding: {glob: surface_temperature}
# 75: another process makes the same folder.
temporaryFailCodes: [75]
permanentFailCodes: [2, 3]
