# From the logs of a campaign to its tables and reports.
#
#   snakemake --cores all --config campaign=DIR results=DIR
#
# Every step is a function of reduction/steps.py; the rules say in which order, on what, and when anew.

from snakemake.utils import min_version

min_version("9.27")


include: "workflow/rules/start.smk"  # the folders, the plan of the run, one run at a time, the check of the campaign


localrules:  # what a cluster need not be asked for
    all,
    session_files,
    tidy,


rule all:
    input:
        ".motescale/tidied.json",
        "SHA256SUMS",


include: "workflow/rules/reduce.smk"  # session by session: logs -> a record of tables and facts
include: "workflow/rules/adjust.smk"  # where asked for: all sessions together
include: "workflow/rules/tables.smk"  # records -> the campaign's tables, run.json
include: "workflow/rules/comparison.smk"  # the campaign's tables -> which group charges more, histograms of charge
include: "workflow/rules/reports.smk"  # records -> the sessions' reports, the campaign's report
include: "workflow/rules/marking.smk"  # where the campaign is marked: records and claims -> marks
include: "workflow/rules/tidy.smk"  # nothing stays of sessions that are gone
include: "workflow/rules/provenance.smk"  # last: how the results came about, the checksums of every file
