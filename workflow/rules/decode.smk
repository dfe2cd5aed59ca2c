# Regions and posteriors: cut into batches of records, each decoded on its own, then gathered.


checkpoint batches:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/batches"),
    log:
        f"{RESULTS}/logs/batches/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/batches/{{assembly}}.tsv"
    params:
        options=batches_options,
    shell:
        "hmmseg batches {input.fasta:q} --output {output.folder:q} {params.options} > {log:q} 2>&1"


rule decode:
    input:
        fasta=fasta_of,
        exclude=exclude_of,
        model=rules.train.output.model,
        batches=rules.batches.output.folder,
    output:
        folder=temp(directory(f"{RESULTS}/{{assembly}}/parts/{{batch}}")),
    log:
        f"{RESULTS}/logs/decode/{{assembly}}/{{batch}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/decode/{{assembly}}/{{batch}}.tsv"
    threads: config["threads"]
    params:
        options=decode_options,
    shell:
        "hmmseg decode {input.fasta:q} --model {input.model:q} --output {output.folder:q}"
        " --records {input.batches:q}/{wildcards.batch}.txt {params.options}"
        " --threads {threads} > {log:q} 2>&1"


rule gather:
    input:
        parts=parts_of,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/calls"),
    log:
        f"{RESULTS}/logs/gather/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/gather/{{assembly}}.tsv"
    shell:
        "hmmseg gather {input.parts:q} --output {output.folder:q} > {log:q} 2>&1"
