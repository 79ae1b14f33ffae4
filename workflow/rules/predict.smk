# predict: predicts the duties and their margins
rule predict:
    input:
        "{study}/records.nc",
        "{study}/posterior.nc",
        "{study}/evidence/fit.json",
    output:
        "{study}/predictions.nc",
        "{study}/bands.csv",
        "{study}/margins.csv",
        "{study}/evidence/predict.json",
        "{study}/evidence/steps/predict.json",
    params:
        study=folder_of,
        needs=needs("predict"),
    shell:
        "python -m perdure.steps.predict --study {params.study:q} --results {wildcards.study:q} --cores {threads}"
