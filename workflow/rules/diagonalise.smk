rule diagonalise:
    input:
        "orders/{block}.parquet",
    output:
        "spectra/{block}.{operator}.parquet",
    log:
        "logs/diagonalise/{block}.{operator}.log",
    conda:
        "../envs/conetone.yaml"
    params:
        request=lambda w: plan.job("diagonalise", f"{w.block}.{w.operator}").request.text(),
    resources:
        mem_mb=lambda w: plan.job("diagonalise", f"{w.block}.{w.operator}").memory_mb,
    threads: lambda w: plan.job("diagonalise", f"{w.block}.{w.operator}").threads
    shell:
        "conetone diagonalise --request {params.request:q}"
        " --orders {input:q} --output {output:q} --threads {threads} 2>> {log:q}"
