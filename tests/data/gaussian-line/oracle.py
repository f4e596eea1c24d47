# Fit and posterior of a Gaussian line on deterministic data, by general libraries only: least squares
# (scipy), draws (emcee), evidence (dynesty), and moments and evidence by a grid over the parameters.
# Writes oracle.json where it is run.
import numpy as np, json, scipy
from scipy.optimize import least_squares, curve_fit
import emcee, dynesty, warnings
warnings.filterwarnings('ignore')
v=np.linspace(-5,5,101)
# deterministic "noise" that any language can regenerate: sum of sines, not random
noise=0.1*(np.sin(1.0+12.9898*np.arange(101))*0.7+np.cos(2.0+78.233*np.arange(101))*0.7)
true=(1.2,0.35,0.8) # amp, v0, FWHM
k=4*np.log(2)
y=true[0]*np.exp(-k*((v-true[1])/true[2])**2)+noise
sig=0.1
f=lambda p:(p[0]*np.exp(-k*((v-p[1])/p[2])**2)-y)/sig
r=least_squares(f,[1,0,1],xtol=1e-15,ftol=1e-15,gtol=1e-15,method='lm')
cov=np.linalg.inv(r.jac.T@r.jac)
out=dict(data='v=linspace(-5,5,101); y=1.2*exp(-4ln2((v-0.35)/0.8)^2)+0.07*(sin(1+12.9898 i)+cos(2+78.233 i)); sigma=0.1',
 scipy_lm_params=[repr(float(x)) for x in r.x],cost_chi2=repr(float(2*r.cost)),stderr_unscaled=[repr(float(x)) for x in np.sqrt(np.diag(cov))],
 rms_noise=repr(float(np.std(noise))),y_first5=[repr(float(x)) for x in y[:5]],y_sum=repr(float(y.sum())))
r2=least_squares(f,[1,0,1],loss='soft_l1',xtol=1e-15,ftol=1e-15,gtol=1e-15)
out['scipy_softl1_params']=[repr(float(x)) for x in r2.x]
# moments
w=y.copy(); m=(v>-1)&(v<2)
out['moments_-1_2']=dict(m0=repr(float(np.sum(y[m])*0.1)),m1=repr(float(np.sum(y[m]*v[m])/np.sum(y[m]))))
# flat priors amp[0,5] v0[-5,5] fwhm[0.1,5]
lo=np.array([0,-5,0.1]); hi=np.array([5,5,5.])
def ll(p): return -0.5*np.sum(f(p)**2)
def lp(p):
    if np.any(p<lo) or np.any(p>hi): return -np.inf
    return ll(p)
rng=np.random.default_rng(1)
p0=r.x+1e-3*rng.standard_normal((32,3))
s=emcee.EnsembleSampler(32,3,lp); np.random.seed(1)
s.run_mcmc(p0,4000); ch=s.get_chain(discard=1000,flat=True)
out['emcee']=dict(mean=[repr(float(x)) for x in ch.mean(0)],std=[repr(float(x)) for x in ch.std(0)],q16_50_84=[[repr(float(q)) for q in np.percentile(ch[:,i],[16,50,84])] for i in range(3)],nsamp=len(ch),tau=[float(x) for x in s.get_autocorr_time(quiet=True)])
d=dynesty.NestedSampler(ll,lambda u:lo+(hi-lo)*u,3,nlive=1000,rstate=np.random.default_rng(2)); d.run_nested(dlogz=0.01,print_progress=False)
res=d.results; wt=np.exp(res.logwt-res.logz[-1]); wt/=wt.sum()
mean=(wt[:,None]*res.samples).sum(0); sd=np.sqrt((wt[:,None]*(res.samples-mean)**2).sum(0))
out['dynesty']=dict(logz=repr(float(res.logz[-1])),logzerr=repr(float(res.logzerr[-1])),mean=[repr(float(x)) for x in mean],std=[repr(float(x)) for x in sd])
# deterministic grid evidence
from scipy import integrate
a=np.linspace(0.9,1.5,121); b=np.linspace(0.2,0.5,121); c=np.linspace(0.55,1.05,121)
A,B,C=np.meshgrid(a,b,c,indexing='ij'); L=np.zeros(A.shape)
for i in range(101): L+=-0.5*((A*np.exp(-k*((v[i]-B)/C)**2)-y[i])/sig)**2
mx=L.max(); Z=np.trapezoid(np.trapezoid(np.trapezoid(np.exp(L-mx),c,axis=2),b,axis=1),a)
out['grid_logz']=repr(float(mx+np.log(Z)-np.log(np.prod(hi-lo)))); out['max_loglike']=repr(float(ll(r.x)))
P=np.exp(L-mx); 
def mom(x,ax):
    o=tuple(i for i in range(3) if i!=ax); p=P.sum(o); p/=p.sum(); m=(p*x).sum(); return repr(float(m)),repr(float(np.sqrt((p*(x-m)**2).sum())))
out['grid_mean_std']=[mom(a,0),mom(b,1),mom(c,2)]
json.dump(out,open('oracle.json','w'),indent=1); print(json.dumps(out,indent=0))
