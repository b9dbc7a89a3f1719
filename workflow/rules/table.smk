# Gather each signal's features from all recordings.
rule table:
    input:
        before=receipt("verdict", wiring.plan_id),
    output:
        receipt=receipt("table", wiring.plan_id),
    log:
        text=log_of("table", wiring.plan_id),
    run:
        wiring.carry_out_study("table", output.receipt, log.text)
