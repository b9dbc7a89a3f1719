# Hold each channel's quality against the study's limits.
rule verdict:
    input:
        before=wiring.unfinished,
    output:
        receipt=receipt("verdict", wiring.plan_id),
    log:
        text=log_of("verdict", wiring.plan_id),
    run:
        wiring.carry_out_study("verdict", output.receipt, log.text)
