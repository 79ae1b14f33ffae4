# holdout: predicts the readings held out
rule holdout:
    input:
        "{study}/records.nc",
        "{study}/posterior.nc",
        "{study}/evidence/fit.json",
    output:
        "{study}/holdout.csv",
        "{study}/evidence/holdout.json",
        "{study}/evidence/steps/holdout.json",
    params:
        study=folder_of,
        needs=needs("holdout"),
    shell:
        "python -m perdure.steps.holdout --study {params.study:q} --results {wildcards.study:q} --cores {threads}"
