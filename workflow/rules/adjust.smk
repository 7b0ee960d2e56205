# Purpose: reduce all sessions together, where the campaign asks for `adjust: campaign`.
# Input:   the files of the whole campaign, by the digest of their content.
# Output:  a record for each session (.motescale/records/), one note.


rule adjust:
    output:
        ".motescale/adjusted.json",
    log:
        ".motescale/logs/adjust.log",
    params:
        digest=PLAN.adjusted,
    shell:
        "step adjust 2> {log:q}"
