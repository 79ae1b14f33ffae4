# checks: checks the fit and the reach of the duties
rule checks:
    input:
        "{study}/records.nc",
        "{study}/posterior.nc",
        "{study}/evidence/fit.json",
    output:
        "{study}/evidence/checks.json",
        "{study}/evidence/fitted.csv",
        "{study}/evidence/steps/checks.json",
    params:
        study=folder_of,
        needs=needs("checks"),
    shell:
        "python -m perdure.steps.checks --study {params.study:q} --results {wildcards.study:q} --cores {threads}"
