# Lay windows within segments and mark those to reject.
rule epoch:
    input:
        before=wiring.needed_by("epoch"),
    output:
        receipt=receipt("epoch", "{batch}"),
    log:
        text=log_of("epoch", "{batch}"),
    priority: 60
    run:
        wiring.carry_out("epoch", wildcards.batch, output.receipt, log.text)
