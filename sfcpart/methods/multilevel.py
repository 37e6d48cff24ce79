"""draft"""
from __future__ import annotations
import numpy as np, time, os
from sfcpart.methods.coarsen import *
from sfcpart.methods.refine import *
from sfcpart.kernels.two_way import bisect_blocks, refine_pairs
from sfcpart.kernels.contract import group_members
from sfcpart.kernels.threads import run_ranges
T={}
class tm:
    def __init__(s,k): s.k=k
    def __enter__(s): s.t=time.perf_counter()
    def __exit__(s,*a): T[s.k]=T.get(s.k,0)+time.perf_counter()-s.t
OPT=dict(C=100,jet=1,fm=3,patience=25,fine_patience=10,tries=8,passes=4,smallest=200)

def split_multi(graph,n_parts,tolerance,seed=0):
    W=int(graph.vertex_weight.sum())
    target=np.full(n_parts,W/n_parts)
    with tm('coarsen'):
        levels=hierarchy(graph,np.zeros(graph.n,np.int32),smallest=OPT['smallest'],heaviest=max(1,int(1.5*W/OPT['smallest'])),seed=seed)
    blocks=[(0,n_parts)]
    part=np.zeros(levels[-1].graph.n,np.int32)
    for i in range(len(levels)-1,-1,-1):
        lv=levels[i]; g=lv.graph
        if lv.coarse_of is not None: part=part[lv.coarse_of]
        finest=i==0
        while len(blocks)<n_parts and (g.n>=OPT['C']*2*len(blocks) or finest):
            with tm('bisect'):
                blocks=split_blocks(g,part,blocks,n_parts,target,tolerance,seed)
            refine_level(g,part,blocks,n_parts,target,tolerance,seed,finest)
        if not(finest and len(blocks)<n_parts): refine_level(g,part,blocks,n_parts,target,tolerance,seed,finest)
    return part
def capac(g,blocks,n_parts,target,tol,finest):
    cap=np.zeros(n_parts,np.int64)
    mv=int(g.vertex_weight.max())
    for lo,hi in blocks:
        m=hi-lo; t=target[lo:hi].sum()
        rem=int(np.ceil(np.log2(m))) if m>1 else 0
        e=(1+tol)**(1/(1+rem))-1
        cap[lo]=int((1+e)*np.ceil(t))
        if not finest: cap[lo]=max(cap[lo],int(t+mv))
    return cap
def split_blocks(g,part,blocks,n_parts,target,tol,seed):
    order=[b for b in blocks if b[1]-b[0]>1]
    idx=np.full(n_parts,len(order),np.int32)
    for j,(lo,hi) in enumerate(order): idx[lo]=j
    lab=idx[part]
    ptr=np.zeros(len(order)+2,np.int64); mem=np.empty(g.n,np.int32)
    group_members(lab,ptr,mem)
    new=[];
    left=[];right=[];goal=[]
    load=np.zeros(n_parts,np.int64);np.add.at(load,part,g.vertex_weight)
    for lo,hi in blocks:
        if hi-lo==1: new.append((lo,hi));continue
        mid=lo+(hi-lo)//2
        new+= [(lo,mid),(mid,hi)]
        left.append(lo);right.append(mid);goal.append(int(round(load[lo]*target[lo:mid].sum()/target[lo:hi].sum())))
    cap=capac(g,new,n_parts,target,tol,False)
    run_ranges(bisect_blocks,len(left),np.array(left,np.int32),np.array(right,np.int32),np.array(goal,np.int64),ptr,mem,g.indptr,g.indices,g.edge_weight,g.vertex_weight,part,load,cap,np.empty(g.n,np.int64),np.full(g.n,-1,np.int32),OPT['tries'],OPT['passes'],seed,smallest=1)
    return new
def refine_level(g,part,blocks,n_parts,target,tol,seed,finest):
    cap=capac(g,blocks,n_parts,target,tol,finest)
    L=Labels(g,part,cap)
    with tm('rebalance'): rebalance(L)
    if OPT['jet']:
        with tm('jet'): move_labels(L)
    if OPT['fm']:
        with tm('fm'): search_locally(L,rounds=OPT['fm'],patience=OPT['fine_patience'] if g.n>200000 else OPT['patience'],seed=seed)
    if os.environ.get('V'): print(g.n,len(blocks),cut_of(g,part),L.overload)
