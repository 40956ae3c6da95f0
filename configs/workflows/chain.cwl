# The whole chain for one scene. From the top of a checkout:
#
#   cwltool --no-container --cachedir cache --outdir maps configs/workflows/chain.cwl \
#       --project . --job configs/demo.toml --scene data_demo/scene.toml --name emberholt
#
# With --cachedir a chain that failed can go on where it stopped; what cwltool does not recognise it makes again.
cwlVersion: v1.2
class: Workflow
label: Thermal bands to maps of surface temperature and flux
requirements:
  MultipleInputFeatureRequirement: {}
inputs:
  project: {type: Directory, doc: "Holds the job file, the scene description and the rasters they name."}
  job: {type: string, doc: "Path of the job file within the project."}
  scene: {type: string, doc: "Path of the scene description within the project."}
  name: {type: string, doc: "Name of the folder of finished layers."}
outputs:
  maps: {type: Directory, outputSource: layers/folder}
steps:
  radiance:
    run: radiance.cwl
    in:
      project: project
      job: job
      scene: scene
    out: [folder]
  brightness_temperature:
    run: brightness-temperature.cwl
    in:
      project: project
      job: job
      scene: scene
      radiance: radiance/folder
    out: [folder]
  emissivity:
    run: emissivity.cwl
    in:
      project: project
      job: job
      scene: scene
    out: [folder]
  atmosphere:
    run: atmosphere.cwl
    in:
      project: project
      job: job
      scene: scene
    out: [folder]
  surface_temperature:
    run: surface-temperature.cwl
    in:
      project: project
      job: job
      scene: scene
      radiance: radiance/folder
      brightness_temperature: brightness_temperature/folder
      emissivity: emissivity/folder
      atmosphere: atmosphere/folder
    out: [folder]
  flux:
    run: flux.cwl
    in:
      project: project
      job: job
      scene: scene
      surface_temperature: surface_temperature/folder
      emissivity: emissivity/folder
    out: [folder]
  layers:
    run: layers.cwl
    in:
      project: project
      job: job
      scene: scene
      name: name
      stages:
        source: [brightness_temperature/folder, emissivity/folder, surface_temperature/folder, flux/folder]
    out: [folder]
