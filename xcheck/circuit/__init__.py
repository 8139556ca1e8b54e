"""The flat linear circuit: elements, nodal equations, sparse solution over frequency."""
