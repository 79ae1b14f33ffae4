# report: writes the findings and the report; lists everything that comes before, so that nothing old is reported
def everything_before_report(wildcards):
    return made_before_report(STUDIES[wildcards.study])


rule report:
    input:
        everything_before_report,
    output:
        "{study}/findings.csv",
        "{study}/report.html",
        "{study}/run.json",
        "{study}/evidence/steps/report.json",
    params:
        study=folder_of,
        needs=needs("report"),
    shell:
        "python -m perdure.steps.report --study {params.study:q} --results {wildcards.study:q} --cores {threads}"
