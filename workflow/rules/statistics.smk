# Answer the study's questions, a family at a time.
rule statistics:
    input:
        before=receipt("table", wiring.plan_id),
    output:
        receipt=receipt("statistics", wiring.plan_id),
    log:
        text=log_of("statistics", wiring.plan_id),
    run:
        wiring.carry_out_study("statistics", output.receipt, log.text)
