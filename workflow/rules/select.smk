# How many states, and which order: a job for each model of the grid, then a recommendation.


rule select:
    input:
        fasta=fasta_of,
        records=records_of,
        exclude=exclude_of,
    output:
        folder=temp(directory(f"{RESULTS}/{{assembly}}/grid/{{states}}-{{order}}")),
    log:
        f"{RESULTS}/logs/select/{{assembly}}/{{states}}-{{order}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/select/{{assembly}}/{{states}}-{{order}}.tsv"
    threads: config["threads"]
    resources:
        mem_mb=memory_of("select"),
        runtime=minutes_of("select"),
    params:
        options=select_options,
    shell:
        "hmmseg select {input.fasta:q} --output {output.folder:q} --states {wildcards.states}"
        " --orders {wildcards.order} {params.options} --threads {threads} > {log:q} 2>&1"


rule recommend:
    input:
        cells=grid_of,
    output:
        folder=directory(f"{RESULTS}/{{assembly}}/selection"),
    log:
        f"{RESULTS}/logs/recommend/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/recommend/{{assembly}}.tsv"
    resources:
        mem_mb=memory_of("recommend"),
        runtime=minutes_of("recommend"),
    shell:
        "hmmseg recommend {input.cells:q} --output {output.folder:q} > {log:q} 2>&1"
