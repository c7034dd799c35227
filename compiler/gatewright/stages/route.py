"""temp."""
from dataclasses import replace
import numpy as np
from gatewright.circuit import *
from gatewright.gates import GATES
from gatewright.stages import _temp_mapping as T
from gatewright.mapping import _kernels as K
def route(draft):
    n=draft.device.n_qubits; c=draft.circuit
    g=T.graph(draft.device.edges,n)
    two=np.flatnonzero(c.is_unitary&(c.widths==2))
    w=c.qubits[c.offsets[two][:,None]+np.arange(2)].ravel().astype(np.int32)
    off=np.arange(0,2*len(two)+1,2,dtype=np.int32)
    pos=draft.initial.copy()
    x=T.sweep(g,w,off,np.ones(len(two),np.uint8),n,pos,1,rec=True)
    ev=x[3].copy(); ev[ev>=0]=two[ev[ev>=0]]
    lw,lo=c.lanes(); ev=K.weave(ev,lw,lo.astype(np.int32),n+c.n_bits)
    swaps=ev<0
    return relabel(draft, ev, pos)
def relabel(draft,ev,final):
    n=draft.device.n_qubits; c=draft.circuit
    key=np.arange(len(ev),dtype=np.int64)
    # place at each event
    pos=draft.initial.copy(); occ=np.empty(n,int); occ[pos]=np.arange(n)
    pieces=[];org=[]
    rows=np.flatnonzero(ev>=0)
    phys=np.empty(len(c.qubits),np.int32)
    sw=[]
    for e in ev.tolist():
        if e>=0:
            s=slice(c.offsets[e],c.offsets[e+1]); phys[s]=pos[c.qubits[s]]
        else:
            p,q=divmod(-1-e,n); u,v=occ[p],occ[q]; occ[p],occ[q]=v,u; pos[u],pos[v]=q,p; sw.append((p,q))
    cc=replace(c,qubits=phys)
    for chosen,piece in cc.pieces(ev[rows],key[rows]): pieces.append(piece); org.append(ev[rows][chosen])
    if sw:
        pieces.append(Piece(GATES["swap"],key[ev<0],np.array(sw))); org.append(np.full(len(sw),-1))
    out,order=assemble(c,n,pieces)
    return replace(draft,circuit=out,origin=np.concatenate(org)[order] if org else np.zeros(0,np.int64),swaps=len(sw),final=final)
