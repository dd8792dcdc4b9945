rule aggregate:
    input:
        plan.job("aggregate", "all").inputs,
    output:
        plan.job("aggregate", "all").outputs,
    log:
        "logs/aggregate/all.log",
    conda:
        "../envs/conetone.yaml"
    params:
        request=plan.job("aggregate", "all").request.text(),
    resources:
        mem_mb=plan.job("aggregate", "all").memory_mb,
    threads: 1
    shell:
        "conetone aggregate --request {params.request:q} --threads {threads} 2>> {log:q}"
