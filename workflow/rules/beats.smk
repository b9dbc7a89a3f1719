# Find the R peaks of each ECG.
rule beats:
    input:
        before=wiring.needed_by("beats"),
    output:
        receipt=receipt("beats", "{batch}"),
    log:
        receipt("beats", "{batch}.log"),
    priority: 50
    run:
        wiring.carry_out("beats", wildcards.batch, output.receipt)
