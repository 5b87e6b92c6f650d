# Writes lsim.csv: answers of second-order systems to inputs that are straight
# between their samples, which scipy.signal.lsim solves exactly (interp=True).
import numpy as np
from scipy import signal
rows=[]
cases=[("exponential",24,0.64,1000,0.010),("exponential",12,0.2,500,0.02),("exponential",30,1.4,1500,0.004),("ramp",40,0.3,2000,0.006),("s-curve",18,1.0,800,0.03)]
print("case,natural_frequency_hz,damping_ratio,sample_rate_hz,sample,applied,pressure")
for k,(kind,fn,z,fs,T) in enumerate(cases,1):
    w=2*np.pi*fn
    tau=1/(z*w) if z<1 else (z+np.sqrt(z*z-1))/w
    n=int((0.1+12*tau+6*T)*fs); t=np.arange(n)/fs; s=t-0.1
    if kind=="exponential": u=np.where(s>0,1-np.exp(-np.maximum(s,0)/T),0)
    elif kind=="ramp": u=np.clip(s/T+.5,0,1)
    else: x=np.clip(s/T+.5,0,1); u=x*x*(3-2*x)
    u=20+100*u
    _,y,_=signal.lsim(([w*w],[1,2*z*w,w*w]),u-20,t,interp=True)
    for i in range(n): print(f"{k},{fn},{z},{fs},{i},{u[i]:.15g},{7+0.9*y[i]:.15g}")
