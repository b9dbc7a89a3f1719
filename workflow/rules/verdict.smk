# Hold each channel's quality against the study's limits.
rule verdict:
    input:
        before=wiring.unfinished,
    output:
        receipt=receipt("verdict", wiring.plan_id),
    log:
        receipt("verdict", f"{wiring.plan_id}.log"),
    run:
        wiring.carry_out_study("verdict", output.receipt)
