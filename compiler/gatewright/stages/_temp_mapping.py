import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import shortest_path
from gatewright.mapping import _kernels as K
def graph(edges,n):
    a=np.zeros((n,n),bool); a[edges[:,0],edges[:,1]]=True; a|=a.T
    starts=np.concatenate([[0],np.cumsum(a.sum(1))]).astype(np.int32); nb=np.nonzero(a)[1].astype(np.int32)
    d=shortest_path(csr_array(a),unweighted=True).astype(np.int16)
    return starts,nb,d
W0=np.empty((0,0),np.float32)
def settings(g):
    return np.array([20,int(g[2].max())+20,.5,1.,.001,0.,0],float)
def sweep(g,w,off,coupled,n,pos,seed,back=False,rec=False):
    owner,after,before,layer=K.link(w,off,n)
    return K.sweep(w,off,owner,before if back else after,coupled,n,*g,W0,pos,settings(g),np.uint64(seed+88172645463325252),rec)
