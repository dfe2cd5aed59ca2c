# How sure the regions are: null sequence drawn from the assembly, called with the same settings.


rule calibrate:
    input:
        fasta=fasta_of,
        exclude=exclude_of,
        model=model_of,
        calls=f"{RESULTS}/{{assembly}}/calls",
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
