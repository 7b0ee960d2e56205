# Purpose: mark the benches of a campaign that has marking/scheme.yaml, each against a reduction of its own readings.
# Input:   the notes on the records; the files of marking, by the digest of their content.
# Output:  marks for each bench (.motescale/marks/), the mark sheet and the class summary of staff, feedback for each bench.

MARKING = []  # what there is only where the campaign is marked

if PLAN.marks:

    rule mark:
        input:
            rules.adjust.output if PLAN.together else rules.reduce.output,
        output:
            ".motescale/marked/{batch}.json",
        log:
            ".motescale/logs/mark-{batch}.log",
        params:
            digest=lambda wildcards: PLAN.marks_digest(wildcards.batch),
        shell:
            "step mark --batch {wildcards.batch} 2> {log:q}"

    rule mark_sheet:
        input:
            expand(rules.mark.output, batch=PLAN.batches),
        output:
            "marking/staff/marks.csv",
            "marking/staff/judged.csv",
            "marking/staff/register.csv",
        log:
            ".motescale/logs/mark_sheet.log",
        params:
            digest=PLAN.campaign,
        shell:
            "step mark_sheet 2> {log:q}"

    rule bench_reports:
        input:
            rules.mark.output,
        output:
            ".motescale/feedback_drawn/{batch}.json",
        log:
            ".motescale/logs/bench_reports-{batch}.log",
        params:
            digest=lambda wildcards: resultsfolder.bench_pages_digest(PLAN, wildcards.batch),
        shell:
            "step bench_reports --batch {wildcards.batch} 2> {log:q}"

    # The benches' files with it: one job, because each is but a copy of a page that is kept.
    rule class_summary:
        input:
            rules.mark_sheet.output,
            expand(rules.bench_reports.output, batch=PLAN.batches),
        output:
            "marking/staff/summary.pdf",
            "marking/staff/pseudonyms.csv",
            "marking/staff/posted_marks.csv",
            expand("marking/bench/{session}.pdf", session=SESSIONS),
        log:
            ".motescale/logs/class_summary.log",
        params:
            digest=PLAN.campaign,
        shell:
            "step class_summary 2> {log:q}"

    MARKING += rules.mark_sheet.output + rules.class_summary.output
