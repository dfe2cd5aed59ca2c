# One model for each assembly, from all of its selected records.


rule train:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
        init=init_of,
    output:
        model=f"{RESULTS}/{{assembly}}/model.json",
        provenance=f"{RESULTS}/{{assembly}}/model.provenance.json",
    log:
        f"{RESULTS}/logs/train/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/train/{{assembly}}.tsv"
    threads: config["threads"]
    params:
        options=train_options,
    shell:
        "hmmseg train {input.fasta:q} --output {output.model:q} {params.options}"
        " --threads {threads} > {log:q} 2>&1"
