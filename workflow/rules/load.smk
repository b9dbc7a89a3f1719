# Read each signal from its raw file, at its own rate.
rule load:
    input:
        before=wiring.needed_by("load"),
    output:
        receipt=receipt("load", "{batch}"),
    log:
        text=log_of("load", "{batch}"),
    priority: 10
    run:
        wiring.carry_out("load", wildcards.batch, output.receipt, log.text)
