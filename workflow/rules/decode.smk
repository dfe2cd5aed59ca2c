# Regions and posteriors. A small assembly is decoded by one job; a large one is cut into batches
# of records with a job each, whose results are kept and used again wherever the same is asked.


rule decode:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
        model=model_of,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/calls"),
    log:
        f"{RESULTS}/logs/decode/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/decode/{{assembly}}.tsv"
    wildcard_constraints:
        assembly=one_of(SMALL),
    threads: config["threads"]
    resources:
        mem_mb=memory_of("decode"),
        runtime=minutes_of("decode"),
    params:
        options=decode_options,
    shell:
        "hmmseg decode {input.fasta:q} --model {input.model:q} --output {output.folder:q}"
        " {params.options} --threads {threads} > {log:q} 2>&1"


checkpoint batches:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
        model=model_of,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/batches"),
    log:
        f"{RESULTS}/logs/batches/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/batches/{{assembly}}.tsv"
    resources:
        mem_mb=memory_of("batches"),
        runtime=minutes_of("batches"),
    params:
        options=batches_options,
        parts=PARTS,
    shell:
        "hmmseg batches {input.fasta:q} --model {input.model:q} --output {output.folder:q}"
        " --parts {params.parts:q} {params.options} > {log:q} 2>&1"


rule cut:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
        batches=rules.batches.output.folder,
    output:
        folder=temp(directory(f"{RESULTS}/{{assembly}}/pieces")),
    log:
        f"{RESULTS}/logs/cut/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/cut/{{assembly}}.tsv"
    resources:
        mem_mb=memory_of("cut"),
        runtime=minutes_of("cut"),
    params:
        options=survey_options,
    shell:
        "hmmseg cut {input.fasta:q} --batches {input.batches:q} --output {output.folder:q}"
        " {params.options} > {log:q} 2>&1"


rule decode_batch:
    input:
        pieces=rules.cut.output.folder,
        model=model_of,
    output:
        # The result itself stands under its key, where other assemblies find it, too.
        done=temp(touch(f"{RESULTS}/{{assembly}}/decoded/{{batch}}")),
    log:
        f"{RESULTS}/logs/decode_batch/{{assembly}}/{{batch}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/decode_batch/{{assembly}}/{{batch}}.tsv"
    threads: config["threads"]
    resources:
        mem_mb=memory_of("decode_batch"),
        runtime=minutes_of("decode_batch"),
    params:
        options=batch_options,
        parts=PARTS,
    shell:
        "hmmseg decode {input.pieces:q}/{wildcards.batch}.fa --model {input.model:q}"
        " --exclude {input.pieces:q}/{wildcards.batch}.bed --reuse"
        " --output {params.parts:q}/{wildcards.batch} {params.options}"
        " --threads {threads} > {log:q} 2>&1"


rule gather:
    input:
        batches=rules.batches.output.folder,
        decoded=decoded_batches,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/calls"),
    log:
        f"{RESULTS}/logs/gather/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/gather/{{assembly}}.tsv"
    wildcard_constraints:
        assembly=one_of(LARGE),
    threads: config["threads"]
    resources:
        mem_mb=memory_of("gather"),
        runtime=minutes_of("gather"),
    params:
        parts=PARTS,
    shell:
        "hmmseg gather {input.batches:q} --parts {params.parts:q} --output {output.folder:q}"
        " --threads {threads} > {log:q} 2>&1"
