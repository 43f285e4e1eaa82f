"""Links: what carries readings and inputs over a wire, one protocol per link, all alike to the period.

`protocol` is the contract. `deadline`, `backoff`, `events` and `keeper` know no protocol: waiting in time, waiting to
try again, telling what happened, keeping a session. `opcua` is the OPC UA link; `opcua_addresses` finds nodes,
`opcua_values` translates values, `opcua_survey` looks at a server before it is trusted, `opcua_client` holds the
library at arm's length, `opcua_session` is one session from dialling to loss.
"""
