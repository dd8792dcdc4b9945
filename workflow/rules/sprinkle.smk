rule sprinkle:
    output:
        "orders/{block}.parquet",
    log:
        "logs/sprinkle/{block}.log",
    conda:
        "../envs/conetone.yaml"
    params:
        request=lambda wildcards: plan.job("sprinkle", wildcards.block).request.text(),
    resources:
        mem_mb=lambda wildcards: plan.job("sprinkle", wildcards.block).memory_mb,
    threads: 1
    shell:
        "conetone sprinkle --request {params.request:q}"
        " --output {output:q} --threads {threads} 2>> {log:q}"
