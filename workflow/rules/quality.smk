# Measure clipped and flat stretches before anything is done to the samples.
rule quality:
    input:
        before=wiring.needed_by("quality"),
    output:
        receipt=receipt("quality", "{batch}"),
    log:
        text=log_of("quality", "{batch}"),
    priority: 20
    run:
        wiring.carry_out("quality", wildcards.batch, output.receipt, log.text)
