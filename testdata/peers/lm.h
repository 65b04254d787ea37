/* Fused normal-equations Levenberg-Marquardt in ln p: extra reference point (what a purpose-written
   solver for n<=5 can do compared with a general QR LM such as MINPACK). Damping lambda*2m*I, or
   lambda*diag(J'J) with marq=1; steps with any |dlnp|>2 are refused. cost = 0.5*sum f^2. */
#pragma once
#include "kernels.h"
static double dot(const double*a,const double*b,int n){double s=0;
#pragma omp simd reduction(+:s)
  for(int i=0;i<n;i++)s+=a[i]*b[i];
  return s;}
static int chol_solve(int n,double A[MAXP][MAXP],const double*g,double*x){ /* A x = -g */
  double Lo[MAXP][MAXP];
  for(int i=0;i<n;i++)for(int j=0;j<=i;j++){double s=A[i][j];for(int k=0;k<j;k++)s-=Lo[i][k]*Lo[j][k];
    if(i==j){if(!(s>0))return 0;Lo[i][i]=sqrt(s);}else Lo[i][j]=s/Lo[j][j];}
  for(int i=0;i<n;i++){double s=-g[i];for(int k=0;k<i;k++)s-=Lo[i][k]*x[k];x[i]=s/Lo[i][i];}
  for(int i=n-1;i>=0;i--){double s=x[i];for(int k=i+1;k<n;k++)s-=Lo[k][i]*x[k];x[i]=s/Lo[i][i];}
  return 1;
}
static void lm_fused(const Circuit*c,const Data*d,double*x,int marq,int maxit,int*nfev,int*njev,double*cost){
  static double f[2*MAXM],J[2*MAXM*MAXP]; int n=c->n,mm=2*d->m; double A[MAXP][MAXP],B[MAXP][MAXP],g[MAXP],dx[MAXP],y[MAXP],lam=1e-3,nu=2;
  c->FJ(d,x,f,J); *nfev=1;*njev=1; double F=dot(f,f,mm);
  #define SC(i) (marq?A[i][i]+1e-30:(double)mm)
  for(int it=0;it<maxit;it++){
    for(int i=0;i<n;i++){g[i]=dot(J+i*mm,f,mm);for(int j=0;j<=i;j++)A[i][j]=dot(J+i*mm,J+j*mm,mm);}
    for(;;){
      for(int i=0;i<n;i++){for(int j=0;j<=i;j++)B[i][j]=A[i][j];B[i][i]+=lam*SC(i);}
      int ok=chol_solve(n,B,g,dx); double Fn=NAN,pred=0,sx=0,xx=0;
      if(ok){ for(int i=0;i<n;i++){y[i]=x[i]+dx[i];sx+=dx[i]*dx[i];xx+=x[i]*x[i];pred+=dx[i]*(lam*SC(i)*dx[i]-g[i]);}
        double mx=0; for(int i=0;i<n;i++)mx=fmax(mx,fabs(dx[i]));
        if(mx>2){lam*=nu;nu*=2;continue;}
        c->F(d,y,f,0);(*nfev)++;Fn=dot(f,f,mm); }
      if(Fn<=F){ double act=F-Fn,r=act/pred,t=2*r-1; memcpy(x,y,n*8); int stop=(act<=1e-8*F&&pred<=1e-8*F)||sx<=1e-16*xx; F=Fn;
        if(stop){*cost=0.5*F;return;} double s=1-t*t*t; lam*=s>1./3?s:1./3; nu=2; break; }
      if(ok&&((pred<=1e-8*F&&fabs(Fn-F)<=1e-8*F)||sx<=1e-16*xx)){*cost=0.5*F;return;}
      lam*=nu;nu*=2; if(lam>1e12||++it>=maxit){*cost=0.5*F;return;}
    }
    c->J(d,x,0,J);(*njev)++;
  }
  *cost=0.5*F;
}
