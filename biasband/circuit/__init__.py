"""The circuit: junction laws, bias network, operating point, signal. Arrays in, frozen records out."""
