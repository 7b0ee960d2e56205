# Purpose: compare the groups of the campaign, with the session as the unit, and count charges in histograms.
# Input:   the campaign's tables, run.json; the facts of the records.
# Output:  the tables of the comparison, what they say in words.


rule comparison:
    input:
        rules.tables.output,
    output:
        expand(
            "{table}.csv",
            table=["contrasts", "session_means", "trends", "series", "group_budget"]
            + ["histogram", "charge_distribution", "charge_summary"],
        ),
        "comparison.json",
        report("comparison.csv", caption="../report/captions/comparison.rst", category="Tables"),
    log:
        ".motescale/logs/comparison.log",
    params:
        digest=PLAN.campaign,
    shell:
        "step comparison 2> {log:q}"
