"""temp."""
from dataclasses import replace
import numpy as np
from gatewright.stages import _temp_mapping as T
def place(draft):
    n=draft.device.n_qubits; c=draft.circuit
    g=T.graph(draft.device.edges,n)
    two=np.flatnonzero(c.is_unitary&(c.widths==2))
    w=c.qubits[c.offsets[two][:,None]+np.arange(2)].ravel().astype(np.int32)
    off=np.arange(0,2*len(two)+1,2,dtype=np.int32)
    cp=np.ones(len(two),np.uint8)
    best=None; r=np.random.default_rng(draft.settings.seed)
    for t in range(6):
        pos=r.permutation(n).astype(np.int32)
        for k in range(2):
            T.sweep(g,w,off,cp,n,pos,t); T.sweep(g,w,off,cp,n,pos,t,back=True)
        start=pos.copy()
        x=T.sweep(g,w,off,cp,n,pos,t)
        if best is None or x[2]<best[0]: best=(x[2],start)
    return replace(draft,initial=best[1])
