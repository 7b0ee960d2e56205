# Purpose: draw the reports and lay out the files of each session.
# Input:   the notes on the records; for the campaign's report the tables too.
# Output:  the campaign's report, to print and for a screen; a report and a table of readings for each session.


rule session_reports:
    input:
        rules.adjust.output if PLAN.together else rules.reduce.output,
    output:
        ".motescale/drawn/{batch}.json",
    log:
        ".motescale/logs/session_reports-{batch}.log",
    params:
        digest=lambda wildcards: resultsfolder.pages_digest(PLAN, wildcards.batch),
    shell:
        "step session_reports --batch {wildcards.batch} 2> {log:q}"


rule report:
    input:
        rules.tables.output,
        rules.comparison.output,
        expand(rules.session_reports.output, batch=PLAN.batches),
    output:
        report("report.pdf", caption="../report/captions/report.rst", category="Report"),
        "report.html",
    log:
        ".motescale/logs/report.log",
    params:
        digest=PLAN.campaign,
    shell:
        "step report 2> {log:q}"


# Of its own because the workflow notes every input of a job with every output of it: few of one where many of the other.
rule session_files:
    input:
        "run.json",
        rules.report.output,
    output:
        expand("readings/{session}.csv", session=SESSIONS),
        expand("sessions/{session}.pdf", session=SESSIONS),
    log:
        ".motescale/logs/session_files.log",
    params:
        digest=PLAN.campaign,
    shell:
        "step session_files 2> {log:q}"
