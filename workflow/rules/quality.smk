# Measure clipped and flat stretches before anything is done to the samples.
rule quality:
    input:
        before=wiring.needed_by("quality"),
    output:
        receipt=receipt("quality", "{batch}"),
    log:
        receipt("quality", "{batch}.log"),
    priority: 20
    run:
        wiring.carry_out("quality", wildcards.batch, output.receipt)
