# Purpose: reduce the sessions of a campaign, a batch at a time.
# Input:   the campaign's files, by the digest of their content.
# Output:  a record for each session (.motescale/records/), a note for each batch.


rule reduce:
    output:
        ".motescale/reduced/{batch}.json",
    log:
        ".motescale/logs/reduce-{batch}.log",
    params:
        digest=lambda wildcards: PLAN.batch_digest(wildcards.batch),
    shell:
        "step reduce --batch {wildcards.batch} 2> {log:q}"
