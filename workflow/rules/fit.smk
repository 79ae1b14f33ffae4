# fit: samples the posterior
rule fit:
    input:
        "{study}/records.nc",
        "{study}/priors.csv",
    output:
        "{study}/posterior.nc",
        "{study}/evidence/fit.json",
        "{study}/evidence/steps/fit.json",
    params:
        study=folder_of,
        needs=needs("fit"),
    threads: 4  # a thread for each chain; Snakemake gives fewer where the machine has fewer
    shell:
        "python -m perdure.steps.fit --study {params.study:q} --results {wildcards.study:q} --cores {threads}"
