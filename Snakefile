from snakemake.utils import min_version

min_version("9.0")


configfile: "config/config.yaml"


include: "workflow/rules/settings.smk"
include: "workflow/rules/common.smk"
include: "workflow/rules/options.smk"
include: "workflow/rules/resources.smk"


rule all:
    input:
        summary=f"{RESULTS}/summary.tsv",
        models=expand(f"{RESULTS}/{{assembly}}/model.json", assembly=ASSEMBLIES),
        surveys=expand(f"{RESULTS}/{{assembly}}/survey", assembly=ASSEMBLIES),
        comparisons=expand(f"{RESULTS}/{{assembly}}/comparison", assembly=COMPARED),
        calibrations=expand(f"{RESULTS}/{{assembly}}/calibration", assembly=CALIBRATED),
        selections=selections(),
        pages=pages(),


onstart:
    look_only_when_a_job_ends(workflow)


onsuccess:
    print(reused_batches())


include: "workflow/rules/survey.smk"
include: "workflow/rules/select.smk"
include: "workflow/rules/train.smk"
include: "workflow/rules/decode.smk"
include: "workflow/rules/summary.smk"
include: "workflow/rules/calibrate.smk"
include: "workflow/rules/compare.smk"
include: "workflow/rules/report.smk"
