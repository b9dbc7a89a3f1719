# Compute the features of each signal.
rule features:
    input:
        before=wiring.needed_by("features"),
    output:
        receipt=receipt("features", "{batch}"),
    log:
        text=log_of("features", "{batch}"),
    priority: 80
    run:
        wiring.carry_out("features", wildcards.batch, output.receipt, log.text)
