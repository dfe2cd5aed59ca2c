# What is in the assembly: one table and one JSON document of its records.


rule survey:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/survey"),
    log:
        f"{RESULTS}/logs/survey/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/survey/{{assembly}}.tsv"
    resources:
        mem_mb=memory_of("survey"),
        runtime=minutes_of("survey"),
    params:
        options=survey_options,
    shell:
        "hmmseg survey {input.fasta:q} --output {output.folder:q} {params.options} > {log:q} 2>&1"
