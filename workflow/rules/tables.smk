# Purpose: put the campaign's tables together and state what they were made from.
# Input:   the notes on the records (the records are named by the digests in the plan).
# Output:  one table of each kind, run.json.


rule tables:
    input:
        ".motescale/adjusted.json" if PLAN.together else expand(rules.reduce.output, batch=PLAN.batches),
    output:
        expand("{table}.csv", table=["methods", "agreement", "inputs", "components", "budget"]),
        report("particles.csv", caption="../report/captions/particles.rst", category="Tables"),
        "run.json",
    log:
        ".motescale/logs/tables.log",
    params:
        digest=PLAN.campaign,
    shell:
        "step tables 2> {log:q}"
