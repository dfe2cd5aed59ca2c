# One row for each assembly and reported state.


rule summary:
    input:
        calls=expand(f"{RESULTS}/{{assembly}}/calls", assembly=ASSEMBLIES),
    output:
        table=f"{RESULTS}/summary.tsv",
    log:
        f"{RESULTS}/logs/summary.log",
    benchmark:
        f"{RESULTS}/benchmarks/summary.tsv"
    resources:
        mem_mb=memory_of("summary"),
        runtime=minutes_of("summary"),
    params:
        labelled=labelled_calls,
    shell:
        "hmmseg summary {params.labelled} --output {output.table:q} > {log:q} 2>&1"
