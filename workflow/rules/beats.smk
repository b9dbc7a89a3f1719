# Find the R peaks of each ECG.
rule beats:
    input:
        before=wiring.needed_by("beats"),
    output:
        receipt=receipt("beats", "{batch}"),
    log:
        text=log_of("beats", "{batch}"),
    priority: 50
    run:
        wiring.carry_out("beats", wildcards.batch, output.receipt, log.text)
