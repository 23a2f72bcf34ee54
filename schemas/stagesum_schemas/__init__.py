"""The contract: records, schemas, units; what client and service agree on."""
