# What a plain Python loop of the static sweep takes: numpy, and cvxpy with clarabel.
#
# Run: python static_loop.py ../data/ieee118.grid.toml EVERY   (every EVERY-th outage)
# against: hedgerow sweep ../data/ieee118.grid.toml --rating-factor 1.2,1.5,2 --scheme NAME
# One area, so area control error rests where proportional balancing stands in for
# it here. The steward's programme is that of the sweep at the rungs keep and stretch,
# then limits missed at a price; no feeders, no ties. Not tuned for speed.
import tomllib, time, sys, numpy as np, cvxpy as cp
g=tomllib.load(open(sys.argv[1],'rb')); every=int(sys.argv[2])
bus={b['name']:i for i,b in enumerate(g['bus'])}; n=len(bus)
load=np.array([b.get('load_mw',0.0) for b in g['bus']])
L=[(bus[l['from']],bus[l['to']],100.0/l['reactance_pu']) for l in g['line']]; m=len(L)
U=[(bus[u['bus']],u) for u in g['unit']]; ub=np.array([b for b,_ in U]); p0=np.array([u['base_mw'] for _,u in U])
pmin=np.array([u['min_mw'] for _,u in U]);pmax=np.array([u['max_mw'] for _,u in U]);emin=np.array([u['emergency_min_mw'] for _,u in U]);emax=np.array([u['emergency_max_mw'] for _,u in U])
q=1e2/ p0.clip(1)*6*4/1e0
F=np.array([a for a,_,_ in L]);T=np.array([b for _,b,_ in L]);B=np.array([b for _,_,b in L])
def islands(closed):
    lab=np.arange(n)
    adj=[[] for _ in range(n)]
    for k in range(m):
        if closed[k]: adj[F[k]].append(T[k]);adj[T[k]].append(F[k])
    lab=-np.ones(n,int);c=0
    for s in range(n):
        if lab[s]<0:
            st=[s];lab[s]=c
            while st:
                x=st.pop()
                for y in adj[x]:
                    if lab[y]<0: lab[y]=c;st.append(y)
            c+=1
    return lab,c
def lap(closed):
    M=np.zeros((n,n));
    for k in range(m):
        if closed[k]:
            M[F[k],F[k]]+=B[k];M[T[k],T[k]]+=B[k];M[F[k],T[k]]-=B[k];M[T[k],F[k]]-=B[k]
    return M
def flows(closed,inj,lab,c):
    M=lap(closed); 
    for i in range(c):
        r=int(np.argmax(lab==i)); M[r,:]=0;M[r,r]=1;inj=inj.copy();inj[r]=0
    th=np.linalg.solve(M,inj); return np.where(closed,B*(th[F]-th[T]),0)
base=np.zeros(n);np.add.at(base,ub,p0);base-=load
lab,c=islands(np.ones(m,bool));f0=flows(np.ones(m,bool),base,lab,c)
def prop(out,served,on,lab,c):
    for i in range(c):
        inb=lab==i;us=on&inb[ub];P=out[us].sum();D=served[inb].sum()
        if not us.any(): served[inb]=0;continue
        if P>=D: out[us]*= D/P if P>0 else 0
        else:
            room=(pmax[us]-out[us]).clip(0);used=min(D-P,room.sum())
            if room.sum()>0: out[us]+=used*room/room.sum()
            left=D-P-used
            if left>0: served[inb]*=1-left/D
    return out,served
def steward(out,served,on,closed,lab,c,rate):
    # least rung: keep ranges, then emergency ranges; else miss limits at a price
    th=cp.Variable(n);p=cp.Variable(len(ub));z=cp.Variable(m,nonneg=True)
    A=np.zeros((n,len(ub)));A[ub,range(len(ub))]=1
    M=lap(closed)/100
    live=np.array([(on&(lab[ub]==lab[i])).any() for i in range(n)])
    d=np.where(live,served,0)/100
    for lo,hi,soft in((pmin,pmax,False),(emin,emax,False),(emin,emax,True)):
        fl=cp.multiply(np.where(closed,B/100,0),th[F]-th[T])
        bal=cp.Variable(n) if soft else None
        cons=[A@p-d+(bal if soft else 0)==M@th,p>=np.where(on,lo,0)/100,p<=np.where(on,hi,0)/100]
        cons+=[cp.abs(fl)<=rate/100+(z if soft else 0)]
        obj=cp.sum(cp.multiply(q/2,cp.square(p-np.where(on,p0,0)/100)))+(2000*cp.sum(z)+20000*cp.norm1(bal) if soft else 0)
        pr=cp.Problem(cp.Minimize(obj),cons)
        try: pr.solve(solver=cp.CLARABEL)
        except cp.SolverError: continue
        if pr.status in('optimal','optimal_inaccurate'):
            return p.value*100,np.where(live,served-(bal.value*0 if soft else 0),0)
    return out,served
res={}
names=['steward','area-control-error','proportional']
for s in names:
    t=time.time();cnt=0;lost=0
    for k in range(0,m+len(ub),every):
        for r in(1.2,1.5,2.0):
            rate=r*np.maximum(abs(f0),0.05*abs(f0).max())
            closed=np.ones(m,bool);on=np.ones(len(ub),bool)
            if k<m: closed[k]=False
            else: on[k-m]=False
            out=np.where(on,p0,0.0);served=load.clip(0).copy();cnt+=1
            while True:
                lab,c=islands(closed)
                for i in range(c):
                    if not (on&(lab[ub]==i)).any(): served[lab==i]=0
                if s=='steward': out,served=steward(out,served,on,closed,lab,c,rate)
                out,served=prop(out.copy(),served.copy(),on,lab,c)
                inj=np.zeros(n);np.add.at(inj,ub,np.where(on,out,0));inj-=served
                f=flows(closed,inj,lab,c);o=closed&(abs(f)-rate>0.001*rate)&(abs(f)-rate>0.11)
                if not o.any():break
                closed=closed&~o
            lost+=load.sum()-served.sum()
    dt=time.time()-t
    print(s,cnt,'cascades',round(dt,2),'s',round(1e3*dt/cnt,2),'ms each, mean lost %',round(100*lost/cnt/load.sum(),3),flush=True)
