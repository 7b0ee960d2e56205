# Purpose: tell how the results came about: data package, research object, definition of the workflow, checksums.
# Input:   everything else, finished and tidied.
# Output:  the checksums of all files, written last; what they rest on.


rule provenance:
    input:
        rules.tables.output,
        rules.comparison.output,
        rules.report.output,
        rules.session_files.output,
        rules.tidy.output,
    output:
        "readings.schema.json",
        "datapackage.json",
        "ro-crate-metadata.json",
        "SHA256SUMS",
    log:
        ".motescale/logs/provenance.log",
    params:
        digest=resultsfolder.provenance_digest(PLAN),
    shell:
        "step provenance 2> {log:q}"
