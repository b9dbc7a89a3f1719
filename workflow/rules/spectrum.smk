# Estimate power spectral densities.
rule spectrum:
    input:
        before=wiring.needed_by("spectrum"),
    output:
        receipt=receipt("spectrum", "{batch}"),
    log:
        text=log_of("spectrum", "{batch}"),
    priority: 70
    run:
        wiring.carry_out("spectrum", wildcards.batch, output.receipt, log.text)
