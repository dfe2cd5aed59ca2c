# The hidden Markov model beside Markov chains, on sequence that neither has seen.


rule compare:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
        labels=labels_of,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/comparison"),
    log:
        f"{RESULTS}/logs/compare/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/compare/{{assembly}}.tsv"
    threads: config["threads"]
    resources:
        mem_mb=memory_of("compare"),
        runtime=minutes_of("compare"),
    params:
        options=compare_options,
    shell:
        "hmmseg compare {input.fasta:q} --output {output.folder:q} {params.options}"
        " --threads {threads} > {log:q} 2>&1"
