# One model for each assembly: trained on its selected records, or given and left as it is.


rule train:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
        start=start_of,
        labels=train_labels_of,
    output:
        model=f"{RESULTS}/{{assembly}}/model.json",
        provenance=f"{RESULTS}/{{assembly}}/model.provenance.json",
    log:
        f"{RESULTS}/logs/train/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/train/{{assembly}}.tsv"
    wildcard_constraints:
        assembly=one_of(TRAINED),
    threads: config["threads"]
    resources:
        mem_mb=memory_of("train"),
        runtime=minutes_of("train"),
    params:
        options=train_options,
    shell:
        "hmmseg train {input.fasta:q} --output {output.model:q} {params.options}"
        " --threads {threads} > {log:q} 2>&1"


rule adopt:
    input:
        model=frozen_of,
    output:
        model=f"{RESULTS}/{{assembly}}/model.json",
        provenance=f"{RESULTS}/{{assembly}}/model.provenance.json",
    log:
        f"{RESULTS}/logs/adopt/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/adopt/{{assembly}}.tsv"
    wildcard_constraints:
        assembly=one_of(FROZEN),
    resources:
        mem_mb=memory_of("adopt"),
        runtime=minutes_of("adopt"),
    shell:
        "hmmseg adopt {input.model:q} --output {output.model:q} > {log:q} 2>&1"
