rule figure:
    input:
        plan.job("figure", "all").inputs,
    output:
        plan.job("figure", "all").outputs,
    log:
        "logs/figure/all.log",
    conda:
        "../envs/conetone.yaml"
    params:
        request=plan.job("figure", "all").request.text(),
    resources:
        mem_mb=plan.job("figure", "all").memory_mb,
    threads: 1
    shell:
        "conetone figure --request {params.request:q} --threads {threads} 2>> {log:q}"
