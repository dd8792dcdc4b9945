rule fit:
    input:
        lambda wildcards: plan.job("fit", wildcards.series).inputs,
    output:
        "pieces/{series}.fits.parquet",
        "pieces/{series}.bins.parquet",
        "pieces/{series}.profiles.parquet",
        "pieces/{series}.cutoffs.parquet",
    log:
        "logs/fit/{series}.log",
    conda:
        "../envs/conetone.yaml"
    params:
        request=lambda wildcards: plan.job("fit", wildcards.series).request.text(),
    resources:
        mem_mb=lambda wildcards: plan.job("fit", wildcards.series).memory_mb,
    threads: 1
    shell:
        "conetone fit --request {params.request:q} --threads {threads} 2>> {log:q}"
