# Purpose: remove what is of sessions no longer there; keep what the next run is compared with.
# Input:   everything else.
# Output:  a note.


rule tidy:
    input:
        rules.tables.output,
        rules.comparison.output,
        rules.report.output,
        rules.session_files.output,
        MARKING,
    output:
        ".motescale/tidied.json",
    log:
        ".motescale/logs/tidy.log",
    params:
        digest=PLAN.campaign,
    shell:
        "step tidy 2> {log:q}"
