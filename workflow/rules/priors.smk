# priors: builds the priors
rule priors:
    input:
        "{study}/records.nc",
    output:
        "{study}/priors.csv",
        "{study}/evidence/priors.json",
        "{study}/evidence/steps/priors.json",
    params:
        study=folder_of,
        needs=needs("priors"),
    shell:
        "python -m perdure.steps.priors --study {params.study:q} --results {wildcards.study:q} --cores {threads}"
