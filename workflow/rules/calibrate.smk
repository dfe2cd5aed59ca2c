# How sure the regions are: null sequence drawn from the assembly, called with the same settings.
# For a large assembly it is drawn and called in parts, each a job of its own.


rule nulls:
    input:
        fasta=fasta_of,
        exclude=exclude_of,
        model=model_of,
        calls=f"{RESULTS}/{{assembly}}/calls",
    output:
        folder=temp(directory(f"{RESULTS}/{{assembly}}/nulls")),
    log:
        f"{RESULTS}/logs/nulls/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/nulls/{{assembly}}.tsv"
    resources:
        mem_mb=memory_of("nulls"),
        runtime=minutes_of("nulls"),
    params:
        options=null_options,
    shell:
        "hmmseg nulls {input.fasta:q} --model {input.model:q} --calls {input.calls:q}"
        " --output {output.folder:q} {params.options} > {log:q} 2>&1"


rule replicate:
    input:
        nulls=rules.nulls.output.folder,
    output:
        folder=temp(directory(f"{RESULTS}/{{assembly}}/replicates/{{part}}")),
    log:
        f"{RESULTS}/logs/replicate/{{assembly}}/{{part}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/replicate/{{assembly}}/{{part}}.tsv"
    threads: config["threads"]
    resources:
        mem_mb=memory_of("replicate"),
        runtime=minutes_of("replicate"),
    params:
        parts=parts_of_nulls,
    shell:
        "hmmseg replicate {input.nulls:q} --part {wildcards.part} --of {params.parts}"
        " --output {output.folder:q} --threads {threads} > {log:q} 2>&1"


rule calibrate:
    input:
        fasta=fasta_of,
        exclude=exclude_of,
        model=model_of,
        calls=f"{RESULTS}/{{assembly}}/calls",
        nulls=nulls_of,
        replicates=replicates_of,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/calibration"),
    log:
        f"{RESULTS}/logs/calibrate/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/calibrate/{{assembly}}.tsv"
    threads: config["threads"]
    resources:
        mem_mb=memory_of("calibrate"),
        runtime=minutes_of("calibrate"),
    params:
        options=calibrate_options,
    shell:
        "hmmseg calibrate {input.fasta:q} --model {input.model:q} --calls {input.calls:q}"
        " --output {output.folder:q} {params.options} --threads {threads} > {log:q} 2>&1"
