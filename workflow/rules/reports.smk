# Purpose: draw the reports.
# Input:   the notes on the records; for the campaign's report the tables too.
# Output:  a report for each session, the campaign's report.


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
        expand(rules.session_reports.output, batch=PLAN.batches),
    output:
        "report.pdf",
        expand("sessions/{session}.pdf", session=SESSIONS),
    log:
        ".motescale/logs/report.log",
    params:
        digest=PLAN.campaign,
    shell:
        "step report 2> {log:q}"
