# Asked for by `conetone calibrate`, not part of `all`. Every output of every job, as there.
rule calibrate:
    input:
        lambda wildcards: calibration.outputs,


rule inject:
    input:
        lambda w: calibration.job("inject", f"{w.series}.{w.truth}.{w.part}").inputs,
    output:
        "calibration/{series}.{truth}.{part}.parquet",
    log:
        "logs/inject/{series}.{truth}.{part}.log",
    conda:
        "../envs/conetone.yaml"
    params:
        request=lambda w: calibration.job("inject", f"{w.series}.{w.truth}.{w.part}").request.text(),
    resources:
        mem_mb=lambda w: calibration.job("inject", f"{w.series}.{w.truth}.{w.part}").memory_mb,
    threads: 1
    shell:
        "conetone inject --request {params.request:q}"
        " --output {output:q} --threads {threads} 2>> {log:q}"


rule coverage:
    input:
        lambda wildcards: calibration.job("coverage", "all").inputs,
    output:
        "calibration.parquet",
        "figures/calibration.pdf",
        "figures/calibration.png",
        "figures/calibration.csv",
    log:
        "logs/coverage/all.log",
    conda:
        "../envs/conetone.yaml"
    params:
        request=lambda wildcards: calibration.job("coverage", "all").request.text(),
    resources:
        mem_mb=lambda wildcards: calibration.job("coverage", "all").memory_mb,
    threads: 1
    shell:
        "conetone coverage --request {params.request:q} --threads {threads} 2>> {log:q}"
