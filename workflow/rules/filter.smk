# Apply the filter stages in order.
rule filter:
    input:
        before=wiring.needed_by("filter"),
    output:
        receipt=receipt("filter", "{batch}"),
    log:
        text=log_of("filter", "{batch}"),
    priority: 40
    run:
        wiring.carry_out("filter", wildcards.batch, output.receipt, log.text)
