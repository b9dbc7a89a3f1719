# Write what the paper prints.
rule results:
    input:
        before=receipt("statistics", wiring.plan_id),
    output:
        receipt=receipt("results", wiring.plan_id),
    log:
        text=log_of("results", wiring.plan_id),
    run:
        wiring.publish(output.receipt, log.text)
