# Bring each signal to the study's rate.
rule resample:
    input:
        before=wiring.needed_by("resample"),
    output:
        receipt=receipt("resample", "{batch}"),
    log:
        text=log_of("resample", "{batch}"),
    priority: 30
    run:
        wiring.carry_out("resample", wildcards.batch, output.receipt, log.text)
