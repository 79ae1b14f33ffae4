# intake: reads the register and the records
rule intake:
    output:
        "{study}/records.nc",
        "{study}/intake.csv",
        "{study}/evidence/intake.json",
        "{study}/evidence/steps/intake.json",
    params:
        study=folder_of,
        needs=needs("intake"),
    shell:
        "python -m perdure.steps.intake --study {params.study:q} --results {wildcards.study:q} --cores {threads}"
