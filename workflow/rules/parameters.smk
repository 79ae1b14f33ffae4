# parameters: tabulates the parameters
rule parameters:
    input:
        "{study}/records.nc",
        "{study}/posterior.nc",
        "{study}/evidence/fit.json",
    output:
        "{study}/parameters.csv",
        "{study}/evidence/modulus.csv",
        "{study}/evidence/steps/parameters.json",
    params:
        study=folder_of,
        needs=needs("parameters"),
    shell:
        "python -m perdure.steps.parameters --study {params.study:q} --results {wildcards.study:q} --cores {threads}"
