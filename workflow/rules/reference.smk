# Measure the channels of a signal against others.
rule reference:
    input:
        before=wiring.needed_by("reference"),
    output:
        receipt=receipt("reference", "{batch}"),
    log:
        text=log_of("reference", "{batch}"),
    priority: 35
    run:
        wiring.carry_out("reference", wildcards.batch, output.receipt, log.text)
