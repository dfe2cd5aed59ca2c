# The hidden Markov model beside Markov chains, on sequence that neither has seen. Of a large
# assembly each fold is a job of its own.


rule fold:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
        labels=labels_of,
    output:
        folder=temp(directory(f"{RESULTS}/{{assembly}}/folds/{{fold}}")),
    log:
        f"{RESULTS}/logs/fold/{{assembly}}/{{fold}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/fold/{{assembly}}/{{fold}}.tsv"
    threads: config["threads"]
    resources:
        mem_mb=memory_of("fold"),
        runtime=minutes_of("fold"),
    params:
        options=fold_options,
    shell:
        "hmmseg fold {input.fasta:q} --fold {wildcards.fold} --output {output.folder:q}"
        " {params.options} --threads {threads} > {log:q} 2>&1"


rule compare:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
        labels=labels_of,
        folds=folds_of,
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
