# Pages to look at: one for each assembly, and one that compares them.


rule report:
    input:
        unpack(stages_of),
    output:
        page=report(
            f"{RESULTS}/{{assembly}}/report.html",
            category="Pages",
            labels={"assembly": "{assembly}"},
            caption="../report/page.rst",
        ),
        provenance=f"{RESULTS}/{{assembly}}/report.provenance.json",
        figures=report(
            directory(f"{RESULTS}/{{assembly}}/figures"),
            patterns=["{name}.svg"],
            category="Figures",
            subcategory="{assembly}",
            labels={"figure": "{name}"},
            caption="../report/figure.rst",
        ),
    log:
        f"{RESULTS}/logs/report/{{assembly}}.log",
    benchmark:
        f"{RESULTS}/benchmarks/report/{{assembly}}.tsv"
    resources:
        mem_mb=memory_of("report"),
        runtime=minutes_of("report"),
    params:
        folder=f"{RESULTS}/{{assembly}}",
    shell:
        "hmmseg report {params.folder:q} --output {output.page:q} --figures {output.figures:q}"
        " > {log:q} 2>&1"


rule pages:
    input:
        pages=expand(f"{RESULTS}/{{assembly}}/report.html", assembly=ASSEMBLIES),
    output:
        page=report(
            f"{RESULTS}/report.html", category="Pages", caption="../report/pages.rst"
        ),
        provenance=f"{RESULTS}/report.provenance.json",
    log:
        f"{RESULTS}/logs/pages.log",
    benchmark:
        f"{RESULTS}/benchmarks/pages.tsv"
    resources:
        mem_mb=memory_of("pages"),
        runtime=minutes_of("pages"),
    params:
        folders=[f"{RESULTS}/{assembly}" for assembly in ASSEMBLIES],
    shell:
        "hmmseg report {params.folders:q} --output {output.page:q} > {log:q} 2>&1"
